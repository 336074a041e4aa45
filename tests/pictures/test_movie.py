"""The movie plays, shows what moves, and blitting gives the same pictures as drawing anew."""

from collections.abc import Callable
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest

from rupture.errors import InputError
from rupture.pictures import make_movie
from rupture.pictures import style as look
from rupture.pictures.movie import SHAPES, Animation
from rupture.result import Result


@pytest.fixture(scope="module")
def short(build: Callable[..., Result]) -> Result:
    return build(step_s=6.0, cells=31, sites=4, spacing_km=8.0)


def decoded(path: Path) -> tuple[list[np.ndarray], float, str]:
    import av

    with av.open(str(path)) as container:
        stream = container.streams.video[0]
        frames = [frame.to_ndarray(format="rgb24") for frame in container.decode(stream)]
        return frames, float(stream.average_rate or 0), stream.codec_context.name


def test_h264_holds_every_frame(short: Result, tmp_path: Path) -> None:
    seen: list[tuple[int, int]] = []
    path = make_movie(short, tmp_path / "movie.mp4", progress=lambda done, total: seen.append((done, total)))
    assert path == tmp_path / "movie.mp4"
    frames, rate, codec = decoded(path)
    assert codec == "h264"
    assert short.map is not None
    count = short.map.sizes["source_time"]
    assert len(frames) == count
    assert seen[-1] == (count, count)
    assert all(frame.shape == (960, 1280, 3) for frame in frames)
    assert rate == pytest.approx(4.0)  # few frames are shown slowly enough to follow
    changes = [np.abs(a.astype(int) - b).max() for a, b in pairwise(frames)]
    assert min(changes) > 60
    assert [p.name for p in tmp_path.iterdir()] == ["movie.mp4"]
    # The index stands before the pictures, so that a page can play it while it loads.
    head = path.read_bytes()
    assert head.index(b"moov") < head.index(b"mdat")


@pytest.mark.parametrize("trace", [False, True])
def test_blitting_and_drawing_anew_agree(build: Callable[..., Result], trace: bool) -> None:
    result = build(step_s=8.0, cells=21, sites=3, spacing_km=9.0, trace=trace, second_km=40.0)
    with look.style_context():
        animation = Animation(result, "location", "4:3", None)
    quick = [frame.copy() for frame in animation.frames()]
    slow = [frame.copy() for frame in animation.redrawn_frames()]
    assert len(quick) == len(slow) > 3
    for a, b in zip(quick, slow, strict=True):
        away = np.abs(a[..., :3].astype(int) - b[..., :3]).max(axis=-1)
        assert (away > 24).mean() < 2e-4  # a few pixels where lines are smoothed over each other in another order


def test_frames_follow_the_source(short: Result) -> None:
    with look.style_context():
        animation = Animation(short, "energy", "square", None)
    scene = animation.scene
    for frame in np.flatnonzero(scene.active):
        animation.set_frame(int(frame))
        assert f"{scene.source_time[frame]:+.1f} s" in animation.clock.text
        assert scene.utc(scene.source_time[frame]) in animation.clock.text
        shown = np.array(animation.front.get_data()).T / 1e3
        assert shown == pytest.approx(scene.front_km[:, frame])
        west, east, south, north = (v / 1e3 for v in animation.cells.get_extent())
        assert west <= scene.track_km[frame, 0] <= east
        assert south <= scene.track_km[frame, 1] <= north
        assert len(animation.trail.get_offsets()) == int(np.isfinite(scene.track_km[: frame + 1, 0]).sum())
        assert animation.cursor.get_xdata()[0] == scene.source_time[frame]


def test_cropping_the_image_moves_no_cell(short: Result) -> None:
    with look.style_context():
        animation = Animation(short, "location", "4:3", None)
    frame = int(np.flatnonzero(animation.scene.active)[2])
    animation.set_frame(frame)
    shown = np.asarray(animation.cells.get_array())
    west, east, south, north = (v / 1e3 for v in animation.cells.get_extent())
    whole = animation.values[frame]
    row, column = np.unravel_index(np.argmax(shown), shown.shape)
    east_km = west + (column + 0.5) * (east - west) / shown.shape[1]
    north_km = south + (row + 0.5) * (north - south) / shown.shape[0]
    best = animation.scene.cells.places_km[np.unravel_index(np.argmax(whole), whole.shape)]
    assert (east_km, north_km) == pytest.approx(tuple(best))
    assert shown.sum() == pytest.approx(whole.sum(), rel=0.02)


@pytest.mark.parametrize(("suffix", "shape"), [(".webp", "16:9"), (".gif", "square")])
def test_slides_formats(build: Callable[..., Result], tmp_path: Path, suffix: str, shape: str) -> None:
    from PIL import Image

    result = build(step_s=12.0, cells=15, sites=2, spacing_km=12.0)
    path = make_movie(result, tmp_path / f"movie{suffix}", shape=shape)
    with Image.open(path) as image:
        assert image.size == SHAPES[shape]
        assert result.map is not None
        assert image.n_frames == result.map.sizes["source_time"]


def test_without_an_h264_encoder_the_movie_becomes_webp(
    build: Callable[..., Result], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    import av

    def missing(*args: object, **kwargs: object) -> None:
        raise ValueError("no codec of this name")

    monkeypatch.setattr(av.codec, "Codec", missing)
    result = build(step_s=15.0, cells=15, sites=2, spacing_km=12.0)
    with pytest.warns(UserWarning, match=r"no H\.264 encoder.*movie\.webp"):
        path = make_movie(result, tmp_path / "movie.mp4")
    assert path == tmp_path / "movie.webp"
    assert [p.name for p in tmp_path.iterdir()] == ["movie.webp"]


def test_a_break_leaves_nothing_half_written(short: Result, tmp_path: Path) -> None:
    def stop(done: int, total: int) -> None:
        raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        make_movie(short, tmp_path / "movie.mp4", progress=stop)
    assert list(tmp_path.iterdir()) == []


def test_what_cannot_be_a_movie_is_said(short: Result, tmp_path: Path) -> None:
    with pytest.raises(InputError, match=r"\.mp4, \.webp or \.gif"):
        make_movie(short, tmp_path / "movie.avi")
    with pytest.raises(InputError, match="square"):
        make_movie(short, tmp_path / "movie.mp4", shape="round")
    with pytest.raises(InputError, match="only directions"):
        make_movie(Result(short.summary, short.sites, short.direction), tmp_path / "movie.mp4")


def test_clock_letters_are_pasted_where_they_belong() -> None:
    from rupture.pictures.clock import LETTERS, PastedText

    with look.style_context():
        clock = PastedText(10, 5, 9.0, 160.0)
    frame = np.full((60, 400, 4), 255, np.uint8)
    clock.text = "1 1:8"
    clock.paste(frame)
    ink = [(frame[:, 10 + k * clock.width : 10 + (k + 1) * clock.width, 0] < 128).sum() for k in range(5)]
    assert ink[0] == ink[2] > 0
    assert ink[1] == 0
    assert ink[4] > ink[0] > ink[3] > 0
    assert (frame[:, :10] == 255).all()
    assert (frame[:, 10 + 5 * clock.width :] == 255).all()
    for letter in LETTERS.replace(" ", ""):
        frame[...] = 255
        clock.text = letter
        clock.paste(frame)
        rows, columns = np.nonzero(frame[..., 0] < 200)
        # The whole letter lies within its box, with the box's edge free above and below.
        assert rows.min() > 5
        assert rows.max() < 5 + clock.height - 1
        assert columns.min() >= 10
