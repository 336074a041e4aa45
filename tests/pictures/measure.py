"""Measure the pictures: frames per second against a plain redraw, page size, time to interactive.

Run `python tests/pictures/measure.py`; nothing else should be running.
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


def main() -> None:
    result = fabricated_result(longitude_deg=179.9, latitude_deg=-17.0, step_s=0.136, cells=101, spacing_km=2.5)
    assert result.map is not None
    count = result.map.sizes["source_time"]
    with look.style_context():
        animation = Animation(result, "location", "4:3", None)
    next(animation.frames())  # compiled parts are loaded, as they are when a run comes to its movie
    start = time.perf_counter()
    for _ in animation.frames():
        pass
    quick = count / (time.perf_counter() - start)
    start = time.perf_counter()
    for done, _ in enumerate(animation.redrawn_frames(), start=1):
        if done == 40:
            break
    slow = 40 / (time.perf_counter() - start)
    # What a script does that makes a new map for every frame.
    start = time.perf_counter()
    for frame in range(0, 50, 10):
        with look.style_context():
            new = Animation(result, "location", "4:3", None)
            new.set_frame(frame)
            new.picture.canvas.draw()
    anew = 5 / (time.perf_counter() - start)
    print(
        f"movie drawing: {quick:.0f} frames/s; plain redraw {slow:.1f} ({quick / slow:.0f} times); new map each frame {anew:.1f} ({quick / anew:.0f} times)"
    )
    with tempfile.TemporaryDirectory() as folder:
        start = time.perf_counter()
        path = make_movie(result, Path(folder) / "movie.mp4")
        print(
            f"movie of {count} frames at 1280 x 960, drawn and encoded: {time.perf_counter() - start:.1f} s, {path.stat().st_size / 1e6:.2f} MB"
        )
        large = fabricated_result(cells=200, spacing_km=1.0, step_s=0.34)
        assert large.map is not None
        start = time.perf_counter()
        page = write_report(large, Path(folder) / "report.html")
        frames = large.map.sizes["source_time"]
        print(
            f"report of 200 x 200 cells x {frames} frames, two movies: {page.stat().st_size / 1e6:.2f} MB, written in {time.perf_counter() - start:.1f} s"
        )
        program = find_chromium()
        if program is not None:
            with Browser(program) as browser:
                browser.open(page)
                print(f"time to interactive in Chromium: {browser.run('document.documentElement.dataset.ready')} ms")
        start = time.perf_counter()
        written = draw_all(fabricated_result(), Path(folder) / "figures")
        print(
            f"all figures of eight sites, PNG, PDF and tables: {len(written)} files in {time.perf_counter() - start:.1f} s"
        )


if __name__ == "__main__":
    main()
