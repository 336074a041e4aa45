"""An output folder: one run at a time, written beside and moved into place when whole."""

from __future__ import annotations

import shutil
import tempfile
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from pathlib import Path

from rupture.errors import InputError

LOCK_NAME = ".rupture-lock"


@contextmanager
def output_folder(target: str | Path, overwrite: bool = False, holds: str = "result.nc") -> Iterator[Path]:
    """Give a scratch folder whose content replaces the target's files only when the block ends well.

    Parameters
    ----------
    target
        The folder that the user named; made when it does not exist.
    overwrite
        Whether files of an earlier run may be replaced.
    holds
        The file that marks an earlier run.

    Yields
    ------
    pathlib.Path
        A scratch folder inside the target. Files that the run did not write again stay as they are.

    Raises
    ------
    InputError
        When the target is not a folder, cannot be written, holds an earlier run and `overwrite` is False, or
        another run is writing into it.
    """
    from filelock import FileLock, Timeout

    target = Path(target)
    if target.exists() and not target.is_dir():
        raise InputError(f"{target}: exists and is not a folder; give another --out")
    if (target / holds).exists() and not overwrite:
        raise InputError(
            f"{target}: already holds {holds} of an earlier run; give another --out, or --overwrite to replace it"
        )
    made = not target.exists()
    try:
        target.mkdir(parents=True, exist_ok=True)
        lock = FileLock(target / LOCK_NAME, timeout=0)
        lock.acquire()
    except Timeout:
        raise InputError(
            f"{target}: another run is writing into this folder; wait for it or give another --out"
        ) from None
    except OSError as error:
        raise InputError(f"{target}: cannot be written ({error.strerror or error})") from error
    scratch = Path(tempfile.mkdtemp(prefix=".part-", dir=target))
    try:
        yield scratch
        for path in sorted(p for p in scratch.rglob("*") if p.is_file()):
            final = target / path.relative_to(scratch)
            final.parent.mkdir(parents=True, exist_ok=True)
            path.replace(final)
    finally:
        shutil.rmtree(scratch, ignore_errors=True)
        with suppress(OSError):  # an open file cannot be removed on every system; the lock itself is what counts
            (target / LOCK_NAME).unlink(missing_ok=True)
        lock.release()
        if made and not any(target.iterdir()):
            target.rmdir()
