import dataclasses
import math

import numpy as np
import obspy
import pytest
from obspy.core.inventory import Response
from obspy.core.inventory.response import InstrumentSensitivity, PolesZerosResponseStage

from rupture.records.report import UnusableError
from rupture.records.response import Corners, Instrument, deconvolve, instrument_band, instrument_of
from rupture.records.units import parse_unit

CORNERS = Corners(0.01, 0.02, 7.0, 8.0)
RATE = 50.0


def sensor_response(unit, gain, zeros=(), poles=(), reference=1.0):
    s = 2j * np.pi * reference
    shape = np.prod([s - z for z in zeros]) / np.prod([s - p for p in poles]) if poles else 1.0
    stage = PolesZerosResponseStage(
        1, gain, reference, unit, "V", "LAPLACE (RADIANS/SECOND)", reference, list(zeros), list(poles),
        normalization_factor=1 / abs(shape),
    )  # fmt: skip
    return Response(
        instrument_sensitivity=InstrumentSensitivity(gain, reference, unit, "counts"), response_stages=[stage]
    )


@pytest.mark.parametrize("full", [True, False], ids=["full response", "sensitivity"])
@pytest.mark.parametrize(
    ("unit", "order", "scale"),
    [
        ("m", 0, 1.0), ("m/s", 1, 1.0), ("m/s**2", 2, 1.0), ("nm/s", 1, 1e-9), ("NM/S", 1, 1e-9), ("um/s", 1, 1e-6),
        ("MM/S**2", 2, 1e-3), ("cm/s", 1, 1e-2), ("rad", 0, 1.0), ("rad/s", 1, 1.0), ("rad/s**2", 2, 1.0),
        ("RAD/S", 1, 1.0), ("nrad/s", 1, 1e-9),
    ],
)  # fmt: skip
def test_known_answer_for_every_unit(kit, unit, order, scale, full):
    """A pulse known in closed form, recorded in each unit, comes back as acceleration or rotation rate."""
    wanted = 2 if "m" in unit.lower().replace("rad", "") else 1
    times = -60.0 + np.arange(9000) / RATE
    gain = 4.0e6 * scale  # counts per unit
    counts = gain / scale * 1e-3 * kit.gaussian(times, 20.0, 0.3, order)
    instrument = instrument_of(sensor_response(unit, gain), full)
    grid = (-50.0, 0.05, 3000)
    found = deconvolve(counts, times[0], RATE, instrument, wanted, CORNERS, 60.0, grid)
    truth = 1e-3 * kit.gaussian(grid[0] + grid[1] * np.arange(grid[2]), 20.0, 0.3, wanted)
    # What the pre-filter cuts off below 0.02 Hz is all that may be missing.
    tolerance = 0.03 if wanted == 1 else 0.002
    assert np.abs(found - truth).max() < tolerance * np.abs(truth).max()


def test_poles_and_zeros_of_a_broadband_sensor(kit):
    """Counts made by multiplying spectra with the transfer function written out here."""
    corner, damping = 2 * np.pi / 120.0, 0.707
    poles = [corner * (-damping + 1j * math.sqrt(1 - damping**2)), corner * (-damping - 1j * math.sqrt(1 - damping**2))]
    n = 60000
    times = -600.0 + np.arange(n) / RATE
    velocity = 1e-3 * kit.gaussian(times, 20.0, 0.3, 1)
    f = np.fft.rfftfreq(n, 1 / RATE)
    s = 2j * np.pi * f
    transfer = 1.2e9 * s**2 / ((s - poles[0]) * (s - poles[1]))
    counts = np.fft.irfft(np.fft.rfft(velocity) * transfer, n)
    instrument = instrument_of(sensor_response("m/s", 1.2e9, [0j, 0j], poles), True)
    found = deconvolve(counts, times[0], RATE, instrument, 2, CORNERS, 60.0, (-50.0, 0.05, 3000))
    truth = 1e-3 * kit.gaussian(-50.0 + 0.05 * np.arange(3000), 20.0, 0.3, 2)
    assert np.abs(found - truth).max() < 0.003 * np.abs(truth).max()
    low, high = instrument_band(instrument, RATE, 40.0)
    # A second-order sensor is 40 dB down at a tenth of its corner frequency.
    assert low == pytest.approx(1 / 1200.0, rel=0.03) or low == pytest.approx(1e-3)
    assert high == pytest.approx(25.0)


def test_water_level_bounds_what_is_magnified():
    """Below a 1 Hz corner white counts would grow without bound; the level stops that at its own height."""
    w = 2 * np.pi
    poles = [w * (-0.7 + 0.714j), w * (-0.7 - 0.714j)]
    instrument = instrument_of(sensor_response("m/s", 1.0, [0j, 0j], poles, reference=5.0), True)
    counts = np.random.default_rng(1).standard_normal(30000)
    corners = Corners(0.005, 0.01, 7.0, 8.0)
    at_20 = deconvolve(counts, 0.0, RATE, instrument, 1, corners, 20.0, (100.0, 0.05, 8000))
    at_80 = deconvolve(counts, 0.0, RATE, instrument, 1, corners, 80.0, (100.0, 0.05, 8000))
    low = slice(1, 40)  # up to 0.1 Hz in steps of 1/400 Hz
    assert np.abs(np.fft.rfft(at_80)[low]).max() > 100 * np.abs(np.fft.rfft(at_20)[low]).max()


@pytest.mark.parametrize("rate", [40.0, 62.5, 99.973, 200.0])
@pytest.mark.parametrize("start", [-60.0, -59.9917])
def test_resampling_neither_shifts_nor_aliases(kit, rate, start):
    instrument = Instrument(parse_unit("m/s**2"), "m/s**2", 1000.0)
    times = start + np.arange(round(150 * rate)) / rate
    pulse = 1e3 * kit.gaussian(times, 20.137, 0.3, 2)
    alias = 1e3 * np.sin(2 * np.pi * 13.0 * times)  # above the 10 Hz Nyquist frequency of the grid
    grid = (-40.0, 0.05, 2400)
    found = deconvolve(pulse + alias, start, rate, instrument, 2, CORNERS, 60.0, grid)
    truth = kit.gaussian(grid[0] + grid[1] * np.arange(grid[2]), 20.137, 0.3, 2)
    assert np.abs(found - truth).max() < 0.002 * np.abs(truth).max()


def test_a_shift_of_a_hundredth_of_a_sample_is_seen(kit):
    instrument = Instrument(parse_unit("rad/s"), "rad/s", 1.0)
    times = -60.0 + np.arange(7500) / RATE
    grid = (-40.0, 0.05, 2400)
    on, late = (
        deconvolve(kit.gaussian(times, c, 0.3, 2), -60.0, RATE, instrument, 1, CORNERS, 60.0, grid)
        for c in (20.0, 20.0002)
    )
    slope = np.gradient(on, 0.05)
    assert -(slope @ (late - on)) / (slope @ slope) == pytest.approx(0.0002, rel=0.05)


@pytest.mark.parametrize("value", [0.0, float("nan"), float("inf")])
def test_bad_sensitivity(value):
    response = Response(instrument_sensitivity=InstrumentSensitivity(value, 1.0, "m/s", "counts"))
    with pytest.raises(UnusableError, match="sensitivity is"):
        instrument_of(response, True)


def test_no_response_and_no_unit():
    with pytest.raises(UnusableError, match="no response"):
        instrument_of(None, True)
    with pytest.raises(UnusableError, match="no input unit"):
        instrument_of(Response(instrument_sensitivity=InstrumentSensitivity(1.0, 1.0, None, "counts")), True)


def test_stage_gains_that_disagree_are_told():
    response = sensor_response("m/s", 1e9)
    response.instrument_sensitivity = dataclasses_replace(response.instrument_sensitivity, 1e8)
    found = instrument_of(response, True)
    assert any("stated sensitivity" in n for n in found.notes)
    assert abs(found.transfer(np.array([1.0]))[0]) == pytest.approx(1e9)


def dataclasses_replace(sensitivity, value):
    return InstrumentSensitivity(value, sensitivity.frequency, sensitivity.input_units, sensitivity.output_units)


def test_sensitivity_serves_where_there_are_no_stages():
    response = Response(instrument_sensitivity=InstrumentSensitivity(-2e6, 1.0, "NM/S", "counts"))
    found = instrument_of(response, True)
    assert found.transfer(np.array([1.0]))[0] == pytest.approx(-2e15)
    assert any("negative" in n for n in found.notes)
    assert any("sensitivity only" in n for n in found.notes)


def test_settings_are_frozen(kit):
    with pytest.raises(dataclasses.FrozenInstanceError):
        Instrument(parse_unit("m"), "m", 1.0).sensitivity = 2.0


def test_rotation_sensor_metadata_that_obspy_carries():
    """The rad/s StationXML (channel HJ1) in ObsPy's own test data: 1e9 counts per rad/s, flat."""
    from pathlib import Path

    path = Path(obspy.__file__).parent / "core/tests/data/response_radian_per_second.xml"
    channel = obspy.read_inventory(str(path))[0][0][0]
    found = instrument_of(channel.response, True)
    assert (found.unit.quantity, found.unit.order) == ("rotation", 1)
    np.testing.assert_allclose(found.transfer(np.array([0.01, 1.0, 50.0])), 1e9, rtol=1e-9)
