"""Draw errors of back-azimuth against the Cramer-Rao bound: docs/figures/efficiency.png and efficiency.csv.

Run from the top of the checkout: python docs/generate_efficiency.py
"""

from __future__ import annotations

import csv
import importlib.util
from pathlib import Path

import matplotlib as mpl
import numpy as np

mpl.use("Agg")
import matplotlib.pyplot as plt

HERE = Path(__file__).resolve().parent
spec = importlib.util.spec_from_file_location("cramer_rao", HERE.parent / "tests" / "direction" / "cramer_rao.py")
assert spec is not None
assert spec.loader is not None
model = importlib.util.module_from_spec(spec)
spec.loader.exec_module(model)

RATIOS = (3, 6, 10, 20, 30, 60, 100)
CASES = (("6C", False), ("6C", True), ("3C+rotZ", True))
SEEDS = 3


def rows() -> list[tuple[str, bool, int, float, float, float]]:
    """Return kind, slowness known, signal-to-noise ratio, bound and error in deg, efficiency."""
    found = []
    for kind, known in CASES:
        for snr in RATIOS:
            bound = model.bound_rad(kind, snr, known, model.samples())
            errors = np.concatenate([model.errors_rad(kind, snr, known, seed=seed) for seed in range(SEEDS)])
            spread = float(np.sqrt(np.mean(errors**2)))
            found.append((kind, known, snr, np.degrees(bound), np.degrees(spread), (bound / spread) ** 2))
    return found


def draw(table: list[tuple[str, bool, int, float, float, float]], path: Path) -> None:
    """Draw bound and errors above, efficiency below."""
    figure, (top, bottom) = plt.subplots(2, 1, figsize=(7, 7), sharex=True, height_ratios=(2, 1), layout="constrained")
    for colour, (kind, known) in zip(("#1f77b4", "#17a673", "#d1495b"), CASES, strict=True):
        _, _, snr, bound, error, share = zip(*(r for r in table if r[:2] == (kind, known)), strict=True)
        label = f"{kind}, slowness {'known' if known else 'unknown'}"
        top.loglog(snr, bound, "-", color=colour, lw=1)
        top.loglog(snr, error, "o", color=colour, label=label, mfc="none" if known else colour)
        bottom.semilogx(snr, share, "o-", color=colour, mfc="none" if known else colour)
    top.set_ylabel("back-azimuth error, rms (deg)")
    top.set_title("Errors (symbols) and Cramér-Rao bound (lines); 24 s, 0.3-1.2 Hz", fontsize=11)
    top.legend(frameon=False)
    bottom.axhline(1.0, color="0.5", lw=0.8)
    bottom.axhline(0.8, color="0.5", lw=0.8, ls=":")
    bottom.set_ylim(0, 1.3)
    bottom.set_ylabel("efficiency")
    bottom.set_xlabel("signal-to-noise amplitude ratio")
    bottom.set_xticks(RATIOS, [str(r) for r in RATIOS])
    bottom.minorticks_off()
    for axis in (top, bottom):
        axis.spines[["top", "right"]].set_visible(False)
        axis.grid(alpha=0.25)
    figure.savefig(path, dpi=130)
    plt.close(figure)


def main() -> None:
    """Write table and figure."""
    folder = HERE / "figures"
    folder.mkdir(exist_ok=True)
    table = rows()
    with (folder / "efficiency.csv").open("w", newline="", encoding="utf-8") as file:
        writer = csv.writer(file)
        writer.writerow(["components", "slowness_known", "snr", "bound_deg", "error_deg", "efficiency"])
        writer.writerows([*r[:3], *(f"{v:.4f}" for v in r[3:])] for r in table)
    draw(table, folder / "efficiency.png")


if __name__ == "__main__":
    main()
