"""All figures of a result, with their data beside them."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from functools import partial
from pathlib import Path

import numpy as np

from rupture.pictures.answers import energy_figure, kinds_figure
from rupture.pictures.distance import along_figure, energy_along_figure
from rupture.pictures.frames import frames_figure
from rupture.pictures.inversion import energy_fit_figure
from rupture.pictures.maps import map_figure
from rupture.pictures.outlines import write_areas_geojson, write_kml
from rupture.pictures.overlays import Overlay, read_overlays
from rupture.pictures.panels import direction_figure, directions_figure
from rupture.pictures.posteriors import has_sample, posterior_figure
from rupture.pictures.scene import Scene
from rupture.pictures.sections import section_figure
from rupture.pictures.style import Picture
from rupture.pictures.tables import (
    Grid,
    Table,
    along_tables,
    direction_tables,
    energy_along_tables,
    energy_fit_tables,
    energy_tables,
    frames_tables,
    kinds_tables,
    map_tables,
    posterior_tables,
    section_tables,
)
from rupture.result import Result

FORMATS = ("png", "pdf")


@dataclass(frozen=True)
class Sheet:
    """One figure that a result has the data for.

    Attributes
    ----------
    name
        File name without suffix.
    draw
        Draws it; takes the keyword `style`.
    tables
        Makes its data.
    """

    name: str
    draw: Callable[..., Picture]
    tables: Callable[[], Sequence[Table | Grid]]


def sheets(result: Result, overlays: Sequence[str | Path | Overlay] = ()) -> list[Sheet]:
    """Return the figures that can be drawn of a result: directions always, the rest where the stage ran."""
    scene = Scene.of(result)
    drawn = read_overlays(overlays)
    out = [Sheet("map", partial(map_figure, result, overlays=drawn), partial(map_tables, scene))]
    share = scene.direction["probability"].values
    shown = [s for s in range(len(scene.codes)) if np.isfinite(share[s]).any()]
    if len(shown) > 1:
        out.append(Sheet("directions", partial(directions_figure, result), list))
    taken: set[str] = set()
    for s in shown:
        name = file_name(scene.codes[s])
        while name.lower() in taken:
            name += "_"
        taken.add(name.lower())
        out.append(
            Sheet(
                f"direction_{name}",
                partial(direction_figure, result, scene.codes[s]),
                partial(direction_tables, scene, s),
            )
        )
    if result.map is not None:
        out.append(Sheet("frames", partial(frames_figure, result, overlays=drawn), partial(frames_tables, scene)))
        out.append(Sheet("energy", partial(energy_figure, result), partial(energy_tables, scene)))
    if result.energy is not None:
        inverted = Scene.of(result, "energy")
        out += [
            Sheet(
                "energy_map",
                partial(map_figure, result, field="energy", overlays=drawn),
                partial(map_tables, inverted),
            ),
            Sheet(
                "energy_frames",
                partial(frames_figure, result, field="energy", overlays=drawn),
                partial(frames_tables, inverted),
            ),
            Sheet("energy_along", partial(energy_along_figure, result), partial(energy_along_tables, inverted)),
        ]
        if "observed_power" in result.energy:
            out.append(Sheet("energy_fit", partial(energy_fit_figure, result), partial(energy_fit_tables, inverted)))
    track = result.track
    if track is not None and "along_probability" in track:
        out.append(Sheet("along", partial(along_figure, result), partial(along_tables, scene)))
    if has_sample(result, "azimuth_deg"):
        out.append(Sheet("posterior", partial(posterior_figure, result), partial(posterior_tables, scene)))
    if any(site.code in scene.codes for site in result.records):
        out.append(
            Sheet("section", partial(section_figure, result, sites=result.records), partial(section_tables, scene))
        )
    if result.summary.get("rupture"):
        out.append(Sheet("kinds", partial(kinds_figure, result), partial(kinds_tables, scene)))
    return out


def file_name(code: str) -> str:
    """Return a site code as a safe part of a file name.

    Examples
    --------
    >>> file_name("ZX.R01"), file_name("../a b")
    ('ZX.R01', '_a_b')
    """
    return re.sub(r"[^A-Za-z0-9._-]+", "_", code).lstrip(".") or "site"


def draw_all(
    result: Result,
    out_dir: str | Path,
    style: str | Path | None = None,
    progress: Callable[[int, int], None] | None = None,
    formats: tuple[str, ...] = FORMATS,
    overlays: Sequence[str | Path | Overlay] = (),
    columns: int = 2,
    workers: int = 1,
) -> list[Path]:
    """Draw every figure that the result has the data for, each with its data beside it as CSV or NetCDF, the map as KML too.

    Parameters
    ----------
    result
        A result.
    out_dir
        Folder for the files; made when it does not exist.
    style
        A Matplotlib style file to lay over the house look.
    progress
        Called with (done, total).
    formats
        File formats: png (300 dpi), pdf, svg; none for the tables alone.
    overlays
        GeoJSON files of fault traces or aftershocks to draw on the maps.
    columns
        Width of the figures: 1 or 2 columns of a journal's page.
    workers
        Processes that draw. More than one needs a main module that may be imported again (`if __name__ ==
        "__main__"`), as Python's multiprocessing asks.

    Returns
    -------
    list of pathlib.Path
        What was written, figures and tables.

    Raises
    ------
    InputError
        When the style file or an overlay cannot be used.
    """
    folder = Path(out_dir)
    folder.mkdir(parents=True, exist_ok=True)
    return _run(_Job(result, tuple(read_overlays(overlays)), style, folder, formats, columns), progress, workers)


def draw_everything(
    result: Result,
    out_dir: str | Path,
    style: str | Path | None = None,
    progress: Callable[[int, int], None] | None = None,
    formats: tuple[str, ...] = FORMATS,
    overlays: Sequence[str | Path | Overlay] = (),
    columns: int = 2,
    movie_shape: str = "4:3",
    movie_format: str = "mp4",
    workers: int = 1,
) -> list[Path]:
    """Leave all pictures of a result in a folder: `figures/`, `report.html` and, where something was mapped, its movies.

    Parameters
    ----------
    result
        A result.
    out_dir
        The folder.
    style, progress, formats, overlays, columns, workers
        As in `draw_all`. With two workers one draws figures while the other makes the movies.
    movie_shape
        '4:3', '16:9' or 'square'.
    movie_format
        'mp4', 'webp' or 'gif'.

    Returns
    -------
    list of pathlib.Path
        What was written.

    Raises
    ------
    InputError
        When the style file or an overlay cannot be used.
    """
    folder = Path(out_dir)
    (folder / "figures").mkdir(parents=True, exist_ok=True)
    movies = []
    if result.energy is not None:
        movies.append(("energy", folder / f"movie_energy.{movie_format}"))
    if result.map is not None:
        movies.append(("location", folder / f"movie.{movie_format}"))
    drawn = tuple(read_overlays(overlays))
    figures, page = folder / "figures", folder / "report.html"
    job = _Job(result, drawn, style, figures, formats, columns, page, tuple(movies), movie_shape)
    return _run(job, progress, workers)


def _run(job: _Job, progress: Callable[[int, int], None] | None, workers: int) -> list[Path]:
    tasks = job.tasks()
    written: list[Path] = []
    for done, files in enumerate(_together(job, tasks, workers) if workers > 1 else (task() for task in tasks)):
        written += files
        if progress is not None:
            progress(done + 1, len(tasks))
    return written


@dataclass(frozen=True)
class _Job:
    """What every process that draws has to know."""

    result: Result
    overlays: tuple[Overlay, ...]
    style: str | Path | None
    folder: Path
    formats: tuple[str, ...]
    columns: int = 2
    page: Path | None = None
    movies: tuple[tuple[str, Path], ...] = ()
    movie_shape: str = "4:3"

    def tasks(self) -> list[Callable[[], list[Path]]]:
        """Everything to do: maps first and movies last, so that a helper that works from the end does the longest first."""
        figures = sorted(
            sheets(self.result, self.overlays), key=lambda sheet: not sheet.name.endswith(("map", "frames"))
        )
        out: list[Callable[[], list[Path]]] = [partial(self.draw, sheet) for sheet in figures]
        out.append(self.outline)
        if self.page is not None:
            out.append(self.write_page)
        return out + [partial(self.film, field, path) for field, path in self.movies]

    def draw(self, sheet: Sheet) -> list[Path]:
        """Write one figure and its tables."""
        written = []
        if self.formats:
            picture = sheet.draw(style=self.style, columns=self.columns)
        for suffix in self.formats:
            path = self.folder / f"{sheet.name}.{suffix}"
            picture.savefig(path)
            written.append(path)
        for table in sheet.tables():
            name = f"{sheet.name}_{file_name(table.name)}" if table.name else sheet.name
            written.append(table.write(self.folder / f"{name}.{table.suffix}"))
        return written

    def outline(self) -> list[Path]:
        """Write the outlines for GIS."""
        scene = Scene.of(self.result)
        written = [write_kml(scene, self.folder / "map.kml")]
        if scene.field is not None and not scene.field.is_trace:
            written.append(write_areas_geojson(scene, self.folder / "map_areas.geojson"))
        return written

    def write_page(self) -> list[Path]:
        """Write the report page."""
        from rupture.pictures.report import write_report

        assert self.page is not None
        return [write_report(self.result, self.page, overlays=self.overlays)]

    def film(self, field: str, path: Path) -> list[Path]:
        """Write one movie."""
        from rupture.pictures.movie import make_movie

        shape = self.movie_shape
        return [make_movie(self.result, path, field=field, shape=shape, style=self.style, overlays=self.overlays)]


_prepared: list[_Job] = []


def _prepare(job: _Job) -> None:
    _prepared[:] = [job]


def _do_prepared(index: int) -> list[Path]:
    return _prepared[0].tasks()[index]()


def _together(job: _Job, tasks: list[Callable[[], list[Path]]], workers: int) -> Iterator[list[Path]]:
    """Work from the first task on, while helpers work from the last one back; yields in the order of the tasks."""
    from concurrent.futures import ProcessPoolExecutor
    from multiprocessing import get_context

    # Started anew, not forked: a forked copy of a program with threads may hang.
    with ProcessPoolExecutor(workers - 1, get_context("spawn"), _prepare, (job,)) as pool:
        later = {index: pool.submit(_do_prepared, index) for index in reversed(range(len(tasks)))}
        try:
            for index, task in enumerate(tasks):
                yield task() if later[index].cancel() else later[index].result()
        finally:
            pool.shutdown(cancel_futures=True)
