"""Frames into a file: H.264 through PyAV, animated WebP or GIF through Pillow."""

from __future__ import annotations

from collections import deque
from collections.abc import Iterable
from concurrent.futures import Future, ThreadPoolExecutor
from fractions import Fraction
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

Frame = NDArray[np.uint8]
_AHEAD = 4  # frames that may wait for the encoder


def encode_h264(frames: Iterable[Frame], pixels: tuple[int, int], rate: float, path: Path) -> Path:
    """Write frames as MP4 that plays everywhere (H.264, 4:2:0, index in front).

    Parameters
    ----------
    frames
        Each (height, width, 4) RGBA; only read before the next one is asked for.
    pixels
        Width and height, both even.
    rate
        Frames per second.
    path
        Target, written beside and moved into place.

    Raises
    ------
    LookupError
        When this build of PyAV has no H.264 encoder.
    """
    import av

    try:
        av.codec.Codec("libx264", "w")
    except Exception as error:  # PyAV names this error differently from version to version
        raise LookupError(str(error)) from error
    part = path.with_name(f".{path.name}.part")
    try:
        with av.open(str(part), "w", format="mp4", options={"movflags": "+faststart"}) as container:
            stream: Any = container.add_stream("libx264", rate=Fraction(rate).limit_denominator(1000))
            stream.width, stream.height = pixels
            stream.pix_fmt = "yuv420p"
            stream.options = {"crf": "20", "preset": "veryfast"}
            stream.thread_type = "AUTO"

            def write(frame: Any) -> None:
                container.mux(stream.encode(frame))

            # One frame is encoded while the next is drawn: the encoder works outside Python's lock.
            with ThreadPoolExecutor(1) as pool:
                waiting: deque[Future[None]] = deque()
                for rgba in frames:
                    waiting.append(
                        pool.submit(write, av.VideoFrame.from_ndarray(np.ascontiguousarray(rgba), format="rgba"))
                    )
                    if len(waiting) > _AHEAD:
                        waiting.popleft().result()
                for task in waiting:
                    task.result()
            write(None)
        part.replace(path)
    finally:
        part.unlink(missing_ok=True)
    return path


def encode_images(frames: Iterable[Frame], rate: float, path: Path) -> Path:
    """Write frames as an animated WebP or GIF, by the suffix of the path.

    Parameters
    ----------
    frames
        Each (height, width, 4) RGBA.
    rate
        Frames per second.
    path
        Target, written beside and moved into place.
    """
    from PIL import Image

    images = (Image.fromarray(np.ascontiguousarray(frame[..., :3])) for frame in frames)
    first = next(images)
    part = path.with_name(f".{path.name}.part")
    duration = round(1000 / rate)
    try:
        if path.suffix == ".webp":
            first.save(
                part,
                format="WEBP",
                save_all=True,
                append_images=images,
                duration=duration,
                loop=0,
                quality=80,
                method=2,
            )
        else:
            small = (image.convert("P", palette=Image.Palette.ADAPTIVE, colors=128) for image in images)
            first.convert("P", palette=Image.Palette.ADAPTIVE, colors=128).save(
                part, format="GIF", save_all=True, append_images=small, duration=duration, loop=0, optimize=False
            )
        part.replace(path)
    finally:
        part.unlink(missing_ok=True)
    return path
