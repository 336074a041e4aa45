"""Every example of the gallery runs as it is, with warnings as errors, and ends in a picture."""

import os
import subprocess
import sys
from pathlib import Path

import pytest

FOLDER = Path(__file__).parents[1] / "examples"
EXAMPLES = sorted(FOLDER.glob("*.py"))

# Pictures are saved in place of being shown; the code is the example's own.
RUNNER = """
import runpy, sys
import matplotlib
matplotlib.use("Agg")
from matplotlib import pyplot
pyplot.show = lambda: pyplot.savefig(sys.argv[2], dpi=60)
runpy.run_path(sys.argv[1], run_name="__main__")
"""


def test_there_are_examples_of_every_room() -> None:
    used = {word for path in EXAMPLES for word in path.read_text(encoding="utf-8").replace(".", " ").split()}
    assert {"direction", "synthetic", "resolution", "wavefield", "pictures"} <= used
    assert all(len(path.read_text(encoding="utf-8").splitlines()) < 60 for path in EXAMPLES)


@pytest.mark.parametrize("path", EXAMPLES, ids=lambda path: path.stem)
def test_example_runs_without_a_warning(path: Path, tmp_path: Path) -> None:
    picture = tmp_path / "picture.png"
    done = subprocess.run(
        [sys.executable, "-W", "error", "-c", RUNNER, str(path), str(picture)],
        capture_output=True, text=True, check=False, cwd=tmp_path, env={**os.environ, "MPLBACKEND": "Agg"}, timeout=300,
    )  # fmt: skip
    assert done.returncode == 0, done.stderr
    assert not done.stderr
    from PIL import Image

    with Image.open(picture) as image:
        low, high = image.convert("L").getextrema()
    assert high - low > 100
