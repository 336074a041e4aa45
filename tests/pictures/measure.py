"""Measure the pictures: frames per second against a plain redraw, page size, time to interactive.

Run `python tests/pictures/measure.py [--write]`; nothing else should be running. With `--write` the figures go to
docs/performance_pictures.md, which docs/performance.md includes.
"""

from __future__ import annotations

import sys
import tempfile
import time
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parent))

from browser import Browser, find_chromium
from fabricated import fabricated_result

from rupture.pictures import draw_all, make_movie, write_report
from rupture.pictures import style as look
from rupture.pictures.movie import Animation

PAGE = Path(__file__).parents[2] / "docs" / "performance_pictures.md"


def main() -> None:
    rows = movie_rows() + page_rows()
    for what, measured in rows:
        print(f"{what}: {measured}")
    if "--write" in sys.argv[1:]:
        lines = ["| what | measured |", "| --- | --- |", *(f"| {what} | {measured} |" for what, measured in rows)]
        PAGE.write_text("\n".join(lines) + "\n", encoding="utf-8")


def movie_rows() -> list[tuple[str, str]]:
    """Frames per second of the movie and of two slower ways, turn and turn about so that a busy machine slows all."""
    result = fabricated_result(longitude_deg=179.9, latitude_deg=-17.0, step_s=0.136, cells=101, spacing_km=2.5)
    assert result.map is not None
    count = result.map.sizes["source_time"]
    with look.style_context():
        animation = Animation(result, "location", "4:3", None)
    next(animation.frames())  # compiled parts are loaded, as they are when a run comes to its movie
    seconds, frames = {"quick": 0.0, "redraw": 0.0, "anew": 0.0}, {"quick": 0, "redraw": 0, "anew": 0}
    for turn in range(3):
        start = time.perf_counter()
        frames["quick"] += sum(1 for _ in animation.frames())
        seconds["quick"] += time.perf_counter() - start
        start = time.perf_counter()
        for done, _ in enumerate(animation.redrawn_frames(first=60 + 80 * turn), start=1):
            if done == 20:
                break
        frames["redraw"] += 20
        seconds["redraw"] += time.perf_counter() - start
        # What a script does that makes a new map for every frame.
        start = time.perf_counter()
        for frame in (60 + 80 * turn, 70 + 80 * turn):
            with look.style_context():
                new = Animation(result, "location", "4:3", None)
                new.set_frame(frame)
                new.picture.canvas.draw()
        frames["anew"] += 2
        seconds["anew"] += time.perf_counter() - start
    speed = {name: frames[name] / seconds[name] for name in frames}
    with tempfile.TemporaryDirectory() as folder:
        start = time.perf_counter()
        path = make_movie(result, Path(folder) / "movie.mp4")
        whole, size = time.perf_counter() - start, path.stat().st_size / 1e6
    return [
        ("movie, frames drawn per second (1280 x 960, eight sites, 101 x 101 cells)", f"{speed['quick']:.0f}"),
        ("plain redraw of the same picture, frames per second", f"{speed['redraw']:.1f}"),
        ("a new map for every frame, frames per second", f"{speed['anew']:.1f}"),
        (
            "movie over plain redraw; over a new map for every frame",
            f"{speed['quick'] / speed['redraw']:.0f}; {speed['quick'] / speed['anew']:.0f}",
        ),
        (f"movie of {count} frames, drawn and encoded (H.264)", f"{whole:.1f} s, {size:.2f} MB"),
    ]


def page_rows() -> list[tuple[str, str]]:
    """Size of the report page and time until it answers; seconds of all figures."""
    large = fabricated_result(cells=200, spacing_km=1.0, step_s=0.34)
    assert large.map is not None
    count = large.map.sizes["source_time"]
    rows = []
    with tempfile.TemporaryDirectory() as folder:
        start = time.perf_counter()
        page = write_report(large, Path(folder) / "report.html")
        what = f"report page of 200 x 200 cells x {count} frames and the energy inversion's"
        rows.append((what, f"{page.stat().st_size / 1e6:.2f} MB, written in {time.perf_counter() - start:.1f} s"))
        program = find_chromium()
        if program is not None:
            with Browser(program) as browser:
                browser.open(page)
                rows.append(
                    (
                        "its time to interactive in headless Chromium",
                        f"{browser.run('document.documentElement.dataset.ready')} ms",
                    )
                )
        start = time.perf_counter()
        written = draw_all(fabricated_result(), Path(folder) / "figures")
        rows.append(
            (
                f"figures of eight sites in one process, PNG, PDF and data: {len(written)} files",
                f"{time.perf_counter() - start:.1f} s",
            )
        )
    return rows


if __name__ == "__main__":
    main()
