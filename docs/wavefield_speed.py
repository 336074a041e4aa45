"""Side by side with pyprop8 in one run: seconds and misfit for 240 receivers, six components; and how our cost grows.

Run as `python docs/wavefield_speed.py [PICTURE.png]`; takes two to three minutes, nearly all of it pyprop8's.
Both programs get the same model, band, window, wavenumber step and largest wavenumber, and both cores.
"""

from __future__ import annotations

import contextlib
import io
import multiprocessing
import os
import resource
import sys
import time
import warnings
from concurrent.futures import ProcessPoolExecutor

import numpy as np

from rupture.earth.layers import LayeredModel
from rupture.synthetic.wavefield import FrequencyPlan, Motion, double_couple, greens
from rupture.synthetic.wavefield.sampling import medium, wavenumber_counts, wavenumber_step

LAYERS = [(2.0, 4.5, 2.5, 2400.0), (13.0, 6.0, 3.46, 2700.0), (20.0, 6.6, 3.8, 2900.0), (np.inf, 8.0, 4.5, 3300.0)]
DEPTH_KM = 10.0
MECHANISM = double_couple(np.radians(20.0), np.radians(70.0), np.radians(30.0))
TURN = np.array([[0.0, 1.0, 0.0], [1.0, 0.0, 0.0], [0.0, 0.0, -1.0]])


def model() -> LayeredModel:
    """Return the crust as our model, without loss because pyprop8 has none."""
    table = np.array(LAYERS)
    lossless = np.full(len(LAYERS), np.inf)
    top = np.concatenate([[0.0], np.cumsum(table[:-1, 0])])
    return LayeredModel("crust", top, table[:, 1], table[:, 2], table[:, 3], lossless, lossless)


def pulse(omega: np.ndarray) -> np.ndarray:
    """Return the spectrum of a Gaussian moment rate with 1 % left at 1 Hz."""
    return np.exp(-0.5 * (omega / (2 * np.pi * 0.33)) ** 2 - 4j * omega)


def ours(distance_m: np.ndarray, azimuth: np.ndarray, plan: FrequencyPlan) -> np.ndarray:
    """Return six-component displacement and rotation, shape (receivers, 6, samples)."""
    table = greens(model(), DEPTH_KM, distance_m, plan)
    return table.records(MECHANISM, azimuth, Motion.DISPLACEMENT, source_spectrum=pulse(plan.omega))


def theirs(
    distance_m: np.ndarray, azimuth: np.ndarray, plan: FrequencyPlan, kmax: float, nk: int
) -> tuple[np.ndarray, float, float]:
    """Return the same from pyprop8, rotations from its derivatives with the source's place; seconds on the clock and of the processor."""
    with warnings.catch_warnings(), contextlib.redirect_stdout(io.StringIO()):
        warnings.simplefilter("ignore")
        import pyprop8
    structure = pyprop8.LayeredStructureModel([(h, vp, vs, rho / 1e3) for h, vp, vs, rho in LAYERS])
    source = pyprop8.PointSource(0.0, 0.0, DEPTH_KM, TURN @ MECHANISM @ TURN.T, np.zeros((3, 1)), 0.0)
    places = pyprop8.ListOfReceivers(distance_m / 1e3 * np.sin(azimuth), distance_m / 1e3 * np.cos(azimuth))
    start = time.perf_counter()
    _, u, d = pyprop8.compute_seismograms(
        structure, source, places, plan.samples, plan.step_s, source_time_function=pulse, show_progress=False,
        pad_frac=plan.cycle / plan.samples - 1, alpha=0.05, number_of_processes=2,
        derivatives=pyprop8.DerivativeSwitches(x=True, y=True), stencil_kwargs={"kmin": 0.0, "kmax": kmax, "nk": nk},
    )  # fmt: skip
    east, north = -d[:, 0] / 1e3, -d[:, 1] / 1e3
    clock = time.perf_counter() - start
    used = [resource.getrusage(who) for who in (resource.RUSAGE_SELF, resource.RUSAGE_CHILDREN)]
    six = [u[:, 0], u[:, 1], u[:, 2], north[:, 2], -east[:, 2], 0.5 * (east[:, 1] - north[:, 0])]
    return 1e-15 * np.stack(six, axis=1), clock, sum(r.ru_utime + r.ru_stime for r in used)


def best_seconds(distance_m: np.ndarray, azimuth: np.ndarray, plan: FrequencyPlan) -> tuple[float, float]:
    """Return the shortest of five runs: seconds on the clock, and of the processor."""
    seconds = []
    for _ in range(5):
        start = time.perf_counter(), time.process_time()
        ours(distance_m, azimuth, plan)
        seconds.append((time.perf_counter() - start[0], time.process_time() - start[1]))
    clock, processor = np.min(seconds, axis=0)
    return float(clock), float(processor)


def main() -> None:
    """Print the table; draw the growth when a file is named."""
    plan = FrequencyPlan(step_s=0.25, samples=400, high_hz=1.25)
    distance, azimuth = np.linspace(20e3, 200e3, 240), np.linspace(0.0, 6.2, 240)
    ours(distance[:1], azimuth[:1], plan)  # compiled code is loaded
    mine, (clock, processor) = ours(distance, azimuth, plan), best_seconds(distance, azimuth, plan)
    step = wavenumber_step(model(), plan, 200e3)
    count = int(wavenumber_counts(medium(model(), np.array([DEPTH_KM]), plan.omega), plan.omega, step).max())
    # A process of its own: its two workers with one BLAS thread each are its fastest way to use two cores.
    os.environ["OPENBLAS_NUM_THREADS"] = "1"
    with ProcessPoolExecutor(1, mp_context=multiprocessing.get_context("spawn")) as pool:
        other, clock_there, processor_there = pool.submit(
            theirs, distance, azimuth, plan, count * step * 1e3, count + 1
        ).result()
    misfit = ((mine - other) ** 2).sum(axis=-1) / (other**2).sum(axis=-1)
    print(
        f"240 receivers, six components, {plan.omega.size} frequencies to {plan.high_hz} Hz, {len(LAYERS)} layers, {count} wavenumbers"
    )
    print(f"clock: ours {clock:.3f} s, pyprop8 {clock_there:.1f} s, {clock_there / clock:.0f} times faster")
    print(
        f"processor: ours {processor:.3f} s, pyprop8 {processor_there:.1f} s, {processor_there / processor:.0f} times less"
    )
    print(f"misfit energy: median {np.median(misfit):.1e}, largest {misfit.max():.1e}")

    receivers = np.array([30, 60, 120, 240, 480, 960, 1920])
    by_receivers = [best_seconds(np.linspace(20e3, 200e3, n), np.linspace(0, 6, n), plan)[1] for n in receivers]
    # The wavenumber step depends on window and largest distance; distances are chosen to keep it, so that only the number
    # of frequency points differs.
    windows = [FrequencyPlan(0.25, n, 1.25) for n in (200, 400, 800, 1600)]
    points = np.array([p.omega.size for p in windows])
    smallest = wavenumber_step(model(), windows[-1], 200e3)
    farthest = [200e3 + np.pi * (1 / smallest - 1 / wavenumber_step(model(), p, 200e3)) for p in windows]
    by_points = [
        best_seconds(np.linspace(20e3, far, 240), azimuth, p)[1] for far, p in zip(farthest, windows, strict=True)
    ]
    print(
        "processor seconds against receivers ",
        *(f"{n}: {s:.3f} s" for n, s in zip(receivers, by_receivers, strict=True)),
    )
    print(
        "processor seconds against frequency points",
        *(f"{n}: {s:.3f} s" for n, s in zip(points, by_points, strict=True)),
    )
    if len(sys.argv) > 1:
        draw(receivers, by_receivers, points, by_points)


def draw(receivers: np.ndarray, by_receivers: list[float], points: np.ndarray, by_points: list[float]) -> None:
    """Draw seconds against receivers and against frequency points."""
    import matplotlib.pyplot as plt

    figure, axes = plt.subplots(1, 2, figsize=(8, 3.2), layout="constrained")
    for ax, x, y, label in zip(
        axes, (receivers, points), (by_receivers, by_points), ("receivers", "frequency points"), strict=True
    ):
        ax.plot(x, y, "o-")
        ax.set(xlabel=label, ylabel="processor seconds", ylim=(0, None), xlim=(0, None))
    figure.savefig(sys.argv[1], dpi=120)


if __name__ == "__main__":
    main()
