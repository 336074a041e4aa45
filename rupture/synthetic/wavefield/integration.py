"""The sum over wavenumbers, for all distances as one matrix product."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rupture.earth.layers import LayeredModel
from rupture.synthetic.wavefield.bessel import bessel_tables
from rupture.synthetic.wavefield.reflection import J0_COLUMNS, J1_COLUMNS, J2_COLUMNS, surface_kernels
from rupture.synthetic.wavefield.sampling import (
    FrequencyPlan,
    medium,
    wavenumber_counts,
    wavenumber_step,
    wavenumber_weights,
)

BLOCK_BYTES = 64_000_000
TABLE_BYTES = 400_000_000
"""Upper limits of the memory that one block of frequencies, and the Bessel tables of one batch of distances, take."""

COLUMNS = (J0_COLUMNS, J1_COLUMNS, J2_COLUMNS)

Report = Callable[[int, int], None]


@dataclass(frozen=True)
class Block:
    """Elementary spectra of some frequencies and some rows; rows are the distances of all depths, numbered through.

    Attributes
    ----------
    first
        Number of the first row.
    frequencies
        Which frequencies of the plan.
    spectra
        Displacement (m) and rotation (rad) times s after a moment step of 1 N m, shape (rows, 18, frequencies).
    """

    first: int
    frequencies: slice
    spectra: NDArray[np.complex128]


def integrate(
    model: LayeredModel,
    depth_km: NDArray[np.float64],
    distance_m: Sequence[NDArray[np.float64]],
    plan: FrequencyPlan,
    report: Report | None = None,
) -> Iterator[Block]:
    """Yield the elementary spectra piece by piece, so that memory stays small however many distances are asked for.

    Parameters
    ----------
    model, plan
        Layered half-space; time axis and band.
    depth_km
        Source depths, ascending, shape (depths,).
    distance_m
        For each source depth its distances in m; the same array given twice is tabulated once.
    report
        Called with (done, total).
    """
    omega = plan.omega
    step = wavenumber_step(model, plan, max(float(d.max()) for d in distance_m))
    largest = int(wavenumber_counts(medium(model, depth_km, omega), omega, step).max())
    batches = _batches(distance_m, max(1, TABLE_BYTES // (24 * largest)))
    first = 0
    for number, batch in enumerate(batches):
        depths = sorted({depth for depth, _ in batch})
        layers = medium(model, depth_km[depths], omega)
        counts = wavenumber_counts(layers, omega, step)
        k, weight = wavenumber_weights(step, int(counts.max()))
        tables: dict[tuple[int, int], tuple[NDArray[np.float64], ...]] = {}
        for depth, part in batch:
            name = (id(distance_m[depth]), part.start)
            if name not in tables:
                tables[name] = bessel_tables(distance_m[depth][part], k)
        near = 1.0 / np.concatenate([distance_m[depth][part] for depth, part in batch])
        bytes_each = 288 * max(k.size * len(depths), near.size)
        at_once = int(np.clip(BLOCK_BYTES // bytes_each, 1, 32))
        starts = range(0, omega.size, at_once)
        for done, f in enumerate(starts):
            some = slice(f, min(f + at_once, omega.size))
            count = counts[some]
            used = int(count.max())
            kernels = [np.empty((used, len(depths), some.stop - f, n), complex) for n in COLUMNS]
            surface_kernels(
                k[:used], weight[:used], count, omega[some] ** 2, layers.alpha2[some], layers.beta2[some],
                layers.density, layers.thickness_m, layers.emit, layers.layer_above, *kernels,
            )  # fmt: skip
            sums = [np.empty((near.size, some.stop - f, n), complex) for n in COLUMNS]
            row = 0
            for depth, part in batch:
                own = depths.index(depth)
                wanted = int(count[:, own].max())
                rows = slice(row, row + part.stop - part.start)
                for table, kernel, total in zip(tables[id(distance_m[depth]), part.start], kernels, sums, strict=True):
                    _product(table[:, :wanted], kernel[:wanted, own], total[rows])
                row = rows.stop
            yield Block(first, some, _assemble(sums, near) / (1j * omega[some]))
            if report is not None:
                report(number * len(starts) + done + 1, len(batches) * len(starts))
        first += near.size


def _batches(distance_m: Sequence[NDArray[np.float64]], limit: int) -> list[list[tuple[int, slice]]]:
    """Split (depth, distances) into batches whose Bessel tables fit; distances shared between depths count once."""
    batches: list[list[tuple[int, slice]]] = []
    held: dict[tuple[int, int], int] = {}
    for depth, d in enumerate(distance_m):
        for start in range(0, d.size, limit):
            part = slice(start, min(start + limit, d.size))
            name, size = (id(d), start), part.stop - start
            if not batches or sum(held.values()) + (0 if name in held else size) > limit:
                batches.append([])
                held = {}
            held[name] = size
            batches[-1].append((depth, part))
    return batches


def _product(table: NDArray[np.float64], kernel: NDArray[np.complex128], out: NDArray[np.complex128]) -> None:
    """Put table (rows, k) times kernel (k, frequencies, columns) into out: real by complex in one real product."""
    flat = kernel.reshape(kernel.shape[0], -1).view(float)
    np.matmul(table, flat, out=out.reshape(out.shape[0], -1).view(float))


def _assemble(sums: Sequence[NDArray[np.complex128]], inverse_m: NDArray[np.float64]) -> NDArray[np.complex128]:
    """Combine sums over J0, J1 and J2 (rows, frequencies, columns) into elements (rows, 18, frequencies).

    Derivatives of Bessel functions and the near-field terms J_m / (k r) come from J1' = J0 - J1/x, J2' = J1 - 2 J2/x.
    """
    zero, one, two = sums
    b1_0, b3_0, a2_0, c2_0, kb2_0 = np.moveaxis(zero, -1, 0)
    a1_1, a3_1, b2_1, kc2_1, kb1_1, kb3_1, a2_k1, c2_k1, c1_1 = np.moveaxis(one, -1, 0)
    b1_2, kc1_2, a1_k2, c1_k2 = np.moveaxis(two, -1, 0)
    near = inverse_m[:, None]
    one_dip = near * (c2_k1 - a2_k1)
    two_slip = 2 * near * (a1_k2 - c1_k2)
    rows = [
        -a1_1, a2_0 + one_dip, -a1_1 + two_slip, -a3_1,
        c2_0 - one_dip, -c1_1 - two_slip,
        -b1_0, b2_1, b1_2, -b3_0,
        -near * b2_1, -2 * near * b1_2,
        kb1_1, kb2_0 - near * b2_1, kb1_1 - 2 * near * b1_2, kb3_1,
        0.5 * kc2_1, -0.5 * kc1_2,
    ]  # fmt: skip
    return np.stack(rows, axis=1)
