"""Published relations between magnitude, moment, size and corner frequency of an earthquake."""

from __future__ import annotations

from enum import StrEnum

import numpy as np

from rupture.errors import InputError


class Scaling(StrEnum):
    """Where length and width of a rupture come from when only the magnitude is given."""

    WELLS_COPPERSMITH_1994 = "wells-coppersmith-1994"
    LEONARD_2010 = "leonard-2010"


class Style(StrEnum):
    """Style of faulting as scaling relations tell them apart."""

    STRIKE_SLIP = "strike-slip"
    REVERSE = "reverse"
    NORMAL = "normal"


def moment_from_magnitude(magnitude: float) -> float:
    """Return the scalar moment in N m of a moment magnitude (Hanks & Kanamori 1979).

    M = 2/3 log10(M0) - 10.7 with M0 in dyne cm.

    Examples
    --------
    >>> f"{moment_from_magnitude(7.3):.3e}"
    '1.000e+20'
    """
    return float(10 ** (1.5 * (magnitude + 10.7) - 7))


def magnitude_from_moment(moment_nm: float) -> float:
    """Return the moment magnitude of a scalar moment in N m (Hanks & Kanamori 1979)."""
    return float((np.log10(moment_nm) + 7) / 1.5 - 10.7)


def faulting_style(rake_deg: float) -> Style:
    """Return the style of faulting: within 45 deg of pure strike-slip, else by the sign of the rake.

    Examples
    --------
    >>> faulting_style(-170.0).value, faulting_style(80.0).value
    ('strike-slip', 'reverse')
    """
    rake = (rake_deg + 180) % 360 - 180
    if abs(rake) <= 45 or abs(rake) >= 135:
        return Style.STRIKE_SLIP
    return Style.REVERSE if rake > 0 else Style.NORMAL


def rupture_size_km(
    magnitude: float, rake_deg: float, scaling: Scaling = Scaling.WELLS_COPPERSMITH_1994
) -> tuple[float, float]:
    """Return length and width of a rupture in km.

    Parameters
    ----------
    magnitude
        Moment magnitude.
    rake_deg
        Rake in degrees, for the style of faulting.
    scaling
        Wells & Coppersmith (1994): subsurface rupture length; width is their rupture area over that length (normal
        faults by the relation for all styles). Leonard (2010): interplate strike-slip, length and M = 3.99 + log10 A;
        dip-slip M = 4.24 + 1.667 log10 L, 4.00 + log10 A (coefficients of Leonard 2010 lengths from memory).

    Examples
    --------
    >>> [round(v, 1) for v in rupture_size_km(7.3, 0.0)]
    [90.4, 15.6]
    """
    style = faulting_style(rake_deg)
    if scaling is Scaling.WELLS_COPPERSMITH_1994:
        a, b = {Style.STRIKE_SLIP: (-2.57, 0.62), Style.REVERSE: (-2.42, 0.58), Style.NORMAL: (-2.44, 0.59)}[style]
        c, d = (-3.42, 0.90) if style is Style.STRIKE_SLIP else (-3.49, 0.91)
        length, area = 10 ** (a + b * magnitude), 10 ** (c + d * magnitude)
    elif style is Style.STRIKE_SLIP:
        length = 10 ** ((magnitude - 4.17) / 1.667)
        if length > 45:
            length = 10 ** (magnitude - 5.27)
        area = 10 ** (magnitude - 3.99)
    else:
        length, area = 10 ** ((magnitude - 4.24) / 1.667), 10 ** (magnitude - 4.00)
    return float(length), float(area / length)


def brune_corner_hz(moment_nm: float, stress_drop_pa: float, shear_speed_m_s: float) -> float:
    """Return the S corner frequency of a circular source in Hz (Brune 1970; radius from Eshelby's stress drop).

    fc = 2.34 beta / (2 pi a) with a = (7 M0 / (16 stress drop))^(1/3).
    """
    if not (moment_nm > 0 and stress_drop_pa > 0 and shear_speed_m_s > 0):
        raise InputError("moment, stress drop and shear speed must be positive")
    radius = (7 * moment_nm / (16 * stress_drop_pa)) ** (1 / 3)
    return float(2.34 * shear_speed_m_s / (2 * np.pi * radius))


def brune_stress_drop_pa(moment_nm: float, corner_hz: float, shear_speed_m_s: float) -> float:
    """Return the stress drop in Pa that belongs to a moment and an S corner frequency (Brune 1970)."""
    radius = 2.34 * shear_speed_m_s / (2 * np.pi * corner_hz)
    return float(7 * moment_nm / (16 * radius**3))


def haskell_corner_hz(length_m: float, rupture_speed_m_s: float, wave_speed_m_s: float, angle_rad: float) -> float:
    """Return the corner frequency in Hz of a unilateral line source seen under an angle from its direction.

    Haskell (1964): the far-field pulse is a boxcar of length T = L (1/v_r - cos(angle)/c); its spectrum sinc(f T) has
    its low- and high-frequency asymptotes meet at 1 / (pi T).
    """
    duration = length_m * abs(1 / rupture_speed_m_s - np.cos(angle_rad) / wave_speed_m_s)
    return float(1 / (np.pi * max(duration, 1e-9)))
