"""Rules of the house that a machine can watch."""

import re
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[1]
ORDER = ["records", "direction", "earth", "mapping", "energy", "front", "synthetic", "resolution", "pictures"]
NUMERIC = ["direction", "earth.layers", "mapping", "front", "energy", "site", "geodesy", "conventions"]
HEAVY = ("obspy", "xarray", "matplotlib", "cartopy", "dask", "av", "requests")


@pytest.mark.parametrize("module", NUMERIC)
def test_numeric_modules_know_arrays_only(module):
    code = f"import sys, rupture.{module}; print([m for m in {HEAVY!r} if m in sys.modules])"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"


def test_only_pictures_import_plotting():
    users = {
        path.relative_to(ROOT).parts[1]
        for path in (ROOT / "rupture").rglob("*.py")
        if re.search(r"^\s*(from|import) (matplotlib|cartopy)", path.read_text(encoding="utf-8"), re.MULTILINE)
    }
    assert users <= {"pictures"}


def test_rooms_import_only_what_stands_above_them():
    """At import time; a function may reach down, lazily, for an engine that it is handed by name."""
    wrong = []
    for position, room in enumerate(ORDER):
        for path in (ROOT / "rupture" / room).rglob("*.py"):
            text = path.read_text(encoding="utf-8")
            below = re.findall(r"^(?:from|import) rupture\.(\w+)", text, re.MULTILINE)
            wrong += [f"{path.relative_to(ROOT)} imports {name}" for name in below if name in ORDER[position + 1 :]]
    # Synthetics take their layers from earth and their place in the house from the list above.
    assert wrong == []


def test_no_module_outgrows_its_room():
    long = {
        str(p.relative_to(ROOT)): n
        for p in (ROOT / "rupture").rglob("*.py")
        if (n := len(p.read_text().splitlines())) > 400
    }
    assert long == {}


def test_top_level_holds_nothing_else():
    tracked = subprocess.run(["git", "ls-files"], cwd=ROOT, capture_output=True, text=True, check=False).stdout.split()
    if not tracked:
        pytest.skip("not a git checkout")
    allowed = {
        "README.md",
        "DEVELOPERS.md",
        "pyproject.toml",
        "rupture",
        "workflows",
        "tests",
        "examples",
        "docs",
        "LICENSE",
        "CHANGELOG.md",
    }
    assert {name.split("/")[0] for name in tracked if not name.startswith(".")} <= allowed


def test_help_needs_no_heavy_import():
    code = "import sys; from rupture.cli import build_parser; build_parser().format_help(); print([m for m in ('numpy', 'obspy', 'scipy') if m in sys.modules])"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"
