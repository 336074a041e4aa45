"""Compiled loops of the ray engine: all rays of all pairs, and the sum of their spectra."""

from __future__ import annotations

import numpy as np
from numba import njit
from numpy.typing import NDArray

from rupture.synthetic.interfaces import free_surface_p, free_surface_sv, surface_reflection
from rupture.synthetic.ray_paths import head_derivative, path_sums, reflection, solve_slowness, transmission

Floats = NDArray[np.float64]
Integers = NDArray[np.int64]

RAYS_OF_MIRROR = 6
"""P and S of: reflected, head wave, and reflected after the surface."""

HEAD_LIMIT_HZ = 1.0
"""Frequency at which a head wave stops growing toward its critical distance, where it is one with the reflection."""


@njit(cache=True, error_model="numpy")
def _fill_path(path_m: Floats, top_m: Floats, source: int, depth_m: float, mirror: int, first_up: bool) -> None:
    """Write the vertical metres of a ray.

    Straight up; or, with a mirror (the interface under that layer), down to it and up; or first up to the surface,
    then down to the mirror and up.
    """
    path_m[:] = 0.0
    legs = 3 if first_up else 1
    for k in range(source):
        path_m[k] = legs * (top_m[k + 1] - top_m[k])
    path_m[source] = legs * (depth_m - top_m[source])
    if mirror >= 0:
        path_m[source] += 2 * (top_m[source + 1] - depth_m)
        for k in range(source + 1, mirror + 1):
            path_m[k] = 2 * (top_m[k + 1] - top_m[k])


@njit(cache=True, error_model="numpy")
def _crossings(
    p: float, source: int, mirror: int, first_up: bool, vp: Floats, vs: Floats, rho: Floats
) -> tuple[complex, complex, complex]:
    """Return the product of transmissions (and of the surface's reflection) of P, SV and SH along a ray."""
    out_p, out_sv, out_sh = complex(1.0, 0.0), complex(1.0, 0.0), complex(1.0, 0.0)
    for k in range(source):
        t_p, t_sv, t_sh = transmission(p, k, vp, vs, rho)
        for _ in range(3 if first_up else 1):
            out_p, out_sv, out_sh = out_p * t_p, out_sv * t_sv, out_sh * t_sh
    if first_up:
        s_p, s_sv = surface_reflection(p, vp[0], vs[0])
        out_p, out_sv = out_p * s_p, out_sv * s_sv
    for k in range(source, mirror):
        t_p, t_sv, t_sh = transmission(p, k, vp, vs, rho)
        out_p, out_sv, out_sh = out_p * t_p * t_p, out_sv * t_sv * t_sv, out_sh * t_sh * t_sh
    return out_p, out_sv, out_sh


@njit(cache=True, error_model="numpy")
def _radiate(tensor: Floats, azimuth: float, p: float, speed: float, downward: bool) -> tuple[float, float, float]:
    """Return P, SV and SH radiation l . M . gamma of a moment tensor in axes north, east, down.

    The vector form of Aki & Richards (2002), eq. 4.84-4.91, with the SV axis of their chapter 5.
    """
    sine = p * speed
    cosine = np.sqrt(max(0.0, 1.0 - sine * sine))
    sign = 1.0 if downward else -1.0
    ca, sa = np.cos(azimuth), np.sin(azimuth)
    ray = np.array([sine * ca, sine * sa, sign * cosine])
    sv = np.array([cosine * ca, cosine * sa, -sign * sine])
    sh = np.array([-sa, ca, 0.0])
    out_p, out_sv, out_sh = 0.0, 0.0, 0.0
    for i in range(3):
        for j in range(3):
            out_p += ray[i] * tensor[i, j] * ray[j]
            out_sv += sv[i] * tensor[i, j] * ray[j]
            out_sh += sh[i] * tensor[i, j] * ray[j]
    return out_p, out_sv, out_sh


@njit(cache=True, nogil=True, error_model="numpy")
def trace_rays(
    top_m: Floats,
    vp: Floats,
    vs: Floats,
    rho: Floats,
    qp: Floats,
    qs: Floats,
    mirrors: Integers,
    source_layer: Integers,
    depth_m: Floats,
    tensor: Floats,
    distance_m: Floats,
    azimuth_rad: Floats,
    heads: bool,
) -> tuple[Floats, Floats, Floats, NDArray[np.complex128]]:
    """Trace all rays of all pairs of receiver and point source.

    Parameters
    ----------
    top_m, vp, vs, rho, qp, qs
        Layers in SI, shape (layers,).
    mirrors
        Layers whose base reflects, shape (mirrors,).
    source_layer, depth_m, tensor
        Shapes (sources,), (sources,), (sources, 3, 3); tensors of unit moment, axes north, east, down.
    distance_m, azimuth_rad
        Shape (receivers, sources); azimuth at the source.
    heads
        Whether head waves are traced along the mirrors.

    Returns
    -------
    time_s, loss_s, slowness
        Shape (receivers, sources, rays): travel time, t* and horizontal slowness. Rays are P and S of: direct, then for each
        mirror reflected, head wave, and reflected by surface and mirror.
    motion
        Shape (receivers, sources, rays, 3), complex, time dependence exp(+i omega t): surface displacement toward R,
        toward growing azimuth and up, for a moment rate of 1 N m/s at all frequencies; zero where there is no such ray. For head
        waves it is still to be divided by omega.
    """
    receivers, sources = distance_m.shape
    rays = 2 + RAYS_OF_MIRROR * mirrors.size
    time_s = np.zeros((receivers, sources, rays))
    loss_s = np.zeros((receivers, sources, rays))
    slowness = np.zeros((receivers, sources, rays))
    motion = np.zeros((receivers, sources, rays, 3), np.complex128)
    for r in range(receivers):
        path_m = np.zeros(top_m.size)
        for s in range(sources):
            layer = source_layer[s]
            reach = distance_m[r, s]
            for ray in range(rays):
                shear = ray % 2 == 1
                speed = vs if shear else vp
                quality = qs if shear else qp
                mirror = -1
                is_head, first_up = False, False
                if ray >= 2:
                    mirror = mirrors[(ray - 2) // RAYS_OF_MIRROR]
                    kind = (ray - 2) % RAYS_OF_MIRROR // 2
                    is_head, first_up = kind == 1, kind == 2
                    if mirror < layer or (is_head and not heads):
                        continue
                _fill_path(path_m, top_m, layer, depth_m[s], mirror, first_up)
                if is_head:
                    refractor = speed[mirror + 1]
                    if np.max(speed[: mirror + 1]) >= refractor:
                        continue
                    p = 1.0 / refractor
                    critical, derivative, time, loss = path_sums(path_m, speed, quality, p)
                    along = reach - critical
                    if along <= 0.0:
                        continue
                    time += p * along
                    loss += p * along / quality[mirror + 1]
                else:
                    along, refractor = 0.0, 1.0
                    p = solve_slowness(path_m, speed, reach)
                    _, derivative, time, loss = path_sums(path_m, speed, quality, p)
                cos_source = np.sqrt(1.0 - (p * speed[layer]) ** 2)
                cos_surface = np.sqrt(1.0 - (p * speed[0]) ** 2)
                # Aki & Richards (2002), eq. 4.88-4.90: spreading and impedance between source and receiver.
                level = 1.0 / (4 * np.pi * np.sqrt(rho[layer] * rho[0] * speed[layer] * speed[0]) * speed[layer] ** 2)
                if is_head:
                    reduced = np.sqrt(along**2 + derivative / (np.pi * HEAD_LIMIT_HZ))
                    level *= np.sqrt(p * speed[layer] ** 2 / (reach * cos_source * cos_surface))
                    level /= np.sqrt(refractor) * reduced**1.5
                else:
                    level /= np.sqrt(reach * cos_source * cos_surface * derivative / (p * speed[layer] ** 2))
                c_p, c_sv, c_sh = _crossings(p, layer, mirror, first_up, vp, vs, rho)
                if is_head:
                    b_p, b_sv, b_sh = head_derivative(p, mirror, vp, vs, rho, shear)
                    # exp(-i omega t): minus the integral of the pulse is -i / omega; omega is divided by later.
                    b_p, b_sv, b_sh = -1j * b_p, -1j * b_sv, -1j * b_sh
                elif mirror >= 0:
                    b_p, b_sv, b_sh = reflection(p, mirror, vp, vs, rho)
                else:
                    b_p, b_sv, b_sh = complex(1.0, 0.0), complex(1.0, 0.0), complex(1.0, 0.0)
                f_p, f_sv, f_sh = _radiate(tensor[s], azimuth_rad[r, s], p, speed[layer], mirror >= 0 and not first_up)
                if shear:
                    onward, up = free_surface_sv(p, vp[0], vs[0])
                    sv = level * f_sv * c_sv * b_sv
                    motion[r, s, ray, 0] = np.conj(sv * onward)
                    motion[r, s, ray, 1] = np.conj(2.0 * level * f_sh * c_sh * b_sh)
                    motion[r, s, ray, 2] = np.conj(sv * up)
                else:
                    onward, up = free_surface_p(p, vp[0], vs[0])
                    motion[r, s, ray, 0] = np.conj(level * f_p * c_p * b_p * onward)
                    motion[r, s, ray, 2] = np.conj(level * f_p * c_p * b_p * up)
                time_s[r, s, ray] = time
                loss_s[r, s, ray] = loss
                slowness[r, s, ray] = p
    return time_s, loss_s, slowness, motion


@njit(cache=True, nogil=True, error_model="numpy")
def sum_spectra(
    arrival_s: Floats,
    loss_s: Floats,
    weight: Floats,
    integrated: NDArray[np.bool_],
    source: Floats,
    decay: Floats,
    decay_step_s: float,
    frequency_step_hz: float,
    out: Floats,
) -> None:
    """Add the spectra of all rays of one receiver; real and imaginary parts apart.

    Parameters
    ----------
    arrival_s, loss_s
        Arrival after the first sample and t* in s, shape (sources, rays).
    weight
        Six-component amplitude of each ray, shape (sources, rays, 6, 2); rays whose six are all zero are left out.
    integrated
        Rays that are divided by omega, shape (rays,).
    source
        Moment-rate spectra (from the onset of each source) times all that is common, (2, sources, frequencies); frequency number k is
        (k + 1) times the step.
    decay
        Attenuation and dispersion for t* = 0, decay_step_s, ...; shape (2, levels, frequencies).
    decay_step_s, frequency_step_hz
        Steps of that table and of the frequencies.
    out
        What is added to, shape (2, 6, frequencies).
    """
    sources, rays = arrival_s.shape
    count = source.shape[2]
    line_re, line_im = np.zeros(count), np.zeros(count)
    for s in range(sources):
        for ray in range(rays):
            size = 0.0
            for c in range(6):
                size += abs(weight[s, ray, c, 0]) + abs(weight[s, ray, c, 1])
            if size == 0.0:
                continue
            angle = -2 * np.pi * frequency_step_hz * arrival_s[s, ray]
            turn_re, turn_im = np.cos(angle), np.sin(angle)
            now_re, now_im = turn_re, turn_im
            place = loss_s[s, ray] / decay_step_s
            level = int(place)
            share = place - level
            for k in range(count):
                d_re = decay[0, level, k] + share * (decay[0, level + 1, k] - decay[0, level, k])
                d_im = decay[1, level, k] + share * (decay[1, level + 1, k] - decay[1, level, k])
                z_re = source[0, s, k] * d_re - source[1, s, k] * d_im
                z_im = source[0, s, k] * d_im + source[1, s, k] * d_re
                line_re[k] = z_re * now_re - z_im * now_im
                line_im[k] = z_re * now_im + z_im * now_re
                now_re, now_im = now_re * turn_re - now_im * turn_im, now_re * turn_im + now_im * turn_re
            if integrated[ray]:
                for k in range(count):
                    omega = 2 * np.pi * frequency_step_hz * (k + 1)
                    line_re[k] /= omega
                    line_im[k] /= omega
            for c in range(6):
                w_re, w_im = weight[s, ray, c, 0], weight[s, ray, c, 1]
                for k in range(count):
                    out[0, c, k] += w_re * line_re[k] - w_im * line_im[k]
                    out[1, c, k] += w_re * line_im[k] + w_im * line_re[k]
