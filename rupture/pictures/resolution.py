"""Pictures of resolution studies and of siting."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np

from rupture.conventions import KM
from rupture.event import Event
from rupture.geodesy import LocalPlane
from rupture.pictures import style
from rupture.wording import SHORT_CAUTION

_KINDS = ("stationary", "unilateral", "bilateral")
_FOUND = (*_KINDS, "undetermined")


def resolution_figure(groups: Sequence[dict[str, Any]], rows: Sequence[dict[str, Any]], title: str) -> style.Picture:
    """Return true against found kinds, directions, speeds and lengths of a study, all groups together.

    Parameters
    ----------
    groups
        Summaries per magnitude, noise factor and set of sites.
    rows
        Trials.
    title
        What was studied.
    """
    with style.style_context():
        figure = style.Picture(style.TWO_COLUMNS_MM, 118.0, None)
        figure.set_layout_engine("constrained")
        figure.suptitle(title, x=0.01, ha="left", fontsize=8, fontweight="bold")
        axes = figure.subplots(2, 2)
        _confusion(axes[0, 0], rows)
        _against(axes[0, 1], rows, "azimuth_deg", "direction (deg)", (0, 360))
        _against(axes[1, 0], rows, "speed_km_s", "speed (km/s)", (0, 6))
        longest = max((max(r["true_length_km"], r["length_km"] or 0) for r in rows), default=100.0)
        _against(axes[1, 1], rows, "length_km", "length (km)", (0, 1.05 * longest))
        errors = [g["direction_error_deg_p90"] for g in groups if g["direction_error_deg_p90"] is not None]
        text = f"{len(rows)} synthetic ruptures. "
        if errors:
            text += f"Nine in ten one-way directions within {min(errors):.0f} to {max(errors):.0f} deg, by group. "
        figure.supxlabel(text + SHORT_CAUTION, fontsize=6, color=style.MUTED)
    return figure


def _confusion(axes: Any, rows: Sequence[dict[str, Any]]) -> None:
    share = np.zeros((3, 4))
    for i, true in enumerate(_KINDS):
        part = [r["kind"] for r in rows if r["true_kind"] == true]
        share[i] = [part.count(found) / max(1, len(part)) for found in _FOUND]
    axes.imshow(share, cmap=style.probability_colours(), vmin=0, vmax=1, aspect="auto")
    for i in range(3):
        for j in range(4):
            axes.text(
                j, i, f"{share[i, j]:.0%}", ha="center", va="center", color="white" if share[i, j] > 0.5 else style.INK
            )
    axes.set_xticks(range(4), _FOUND, rotation=20)
    axes.set_yticks(range(3), _KINDS)
    axes.set(xlabel="found", ylabel="true", title="Kinds")


def _against(axes: Any, rows: Sequence[dict[str, Any]], name: str, label: str, limits: tuple[float, float]) -> None:
    axes.plot(limits, limits, color=style.FAINT, linewidth=0.8, zorder=1)
    for kind, marker in (("unilateral", "o"), ("bilateral", "D")):
        part = [r for r in rows if r["true_kind"] == kind and r[name] is not None]
        if not part:
            continue
        true = np.array([r[f"true_{name}"] for r in part])
        best, low, high = (np.array([r[name + end] for r in part]) for end in ("", "_p05", "_p95"))
        if name == "azimuth_deg":
            # Drawn on the turn nearest to the truth, so that north is no edge.
            best = true + (best - true + 180) % 360 - 180
            low, high = best - (best - low) % 360, best + (high - best) % 360
        bars = np.abs(np.stack([best - low, high - best]))
        axes.errorbar(true, best, bars, fmt=marker, markersize=3, mfc="white" if kind == "bilateral" else style.INK, mec=style.INK,
                      mew=0.6, ecolor=style.FAINT, elinewidth=0.8, label=kind)  # fmt: skip
    axes.set(
        xlabel=f"true {label}", ylabel=f"found {label}", xlim=limits, ylim=limits, title=label[0].upper() + label[1:]
    )
    if axes.get_legend_handles_labels()[0]:
        axes.legend(frameon=False, loc="upper left")


def siting_figure(
    event: Event, existing: Sequence[tuple[float, float, str]], candidates: Sequence[Any], ranking: Any
) -> style.Picture:
    """Return a map of candidates coloured by gain, with the chosen ones numbered.

    Parameters
    ----------
    event
        Centre.
    existing
        Longitude, latitude, components of the sites there are.
    candidates, ranking
        As `rupture.resolution.siting.rank` takes and gives them.
    """
    from rupture.pictures.basemap import Extent, draw_graticule, draw_land, draw_scale_bar, projected_axes

    plane = LocalPlane(event.longitude_deg, event.latitude_deg)
    east, north = plane.to_plane([c.longitude_deg for c in candidates], [c.latitude_deg for c in candidates])
    old_east, old_north = plane.to_plane([s[0] for s in existing], [s[1] for s in existing])
    half = 1.12 * max(float(np.abs(np.concatenate([east, north, old_east, old_north])).max()) / KM, 20.0)
    extent = Extent(-half, half, -half, half)
    with style.style_context():
        figure = style.Picture(style.TWO_COLUMNS_MM, 140.0, None)
        axes = projected_axes(figure, plane, extent, (14.0, 12.0, 118.0, 118.0))
        draw_land(axes, plane, extent)
        draw_graticule(axes, plane, extent)
        draw_scale_bar(axes, extent)
        points = axes.scatter(
            east,
            north,
            c=ranking.single,
            cmap=style.probability_colours(),
            s=16,
            edgecolors=style.INK,
            linewidths=0.4,
            zorder=5,
        )
        axes.plot(
            old_east,
            old_north,
            linestyle="none",
            marker="^",
            mfc=style.INK,
            mec=style.INK,
            markersize=5,
            zorder=6,
            label="site there is",
        )
        axes.plot(
            0,
            0,
            linestyle="none",
            marker="*",
            mfc=style.ACCENT,
            mec=style.INK,
            markersize=10,
            zorder=6,
            label="epicentre",
        )
        for number, place in enumerate(ranking.chosen, start=1):
            x, y = plane.to_plane(place.longitude_deg, place.latitude_deg)
            axes.plot(x, y, linestyle="none", marker="o", mfc="none", mec=style.ACCENT, mew=1.4, markersize=9, zorder=7)
            axes.annotate(
                f"{number}",
                (float(x), float(y)),
                xytext=(5, 5),
                textcoords="offset points",
                color=style.ACCENT,
                fontweight="bold",
                zorder=8,
            )
        axes.legend(frameon=True, loc="lower right", fontsize=6)
        bar = figure.colorbar(points, cax=figure.axes_mm(140.0, 35.0, 3.5, 70.0))
        bar.set_label("error area shrinks by this factor")
        figure.text(
            0.07,
            0.95,
            f"Where one more site helps: {event.name or 'planned earthquake'}",
            fontweight="bold",
            fontsize=8,
        )
        figure.text(0.07, 0.02, f"Numbers: greedy order. {SHORT_CAUTION}", fontsize=6, color=style.MUTED)
    return figure
