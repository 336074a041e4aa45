"""The commented files say what the program does."""

import re
import tomllib
from importlib import resources
from pathlib import Path

import pytest

from rupture.settings import Job, read_job

ROOT = Path(__file__).resolve().parents[1]
TEMPLATE = resources.files("rupture") / "templates" / "track.toml"


def _flat(table, prefix=""):
    for key, value in table.items():
        if isinstance(value, dict):
            yield from _flat(value, f"{prefix}{key}.")
        else:
            yield f"{prefix}{key}", value


def test_template_holds_every_key_with_its_default():
    text = TEMPLATE.read_text(encoding="utf-8")
    assert dict(_flat(tomllib.loads(text))) == dict(_flat(Job().as_table()))
    # Keys without a default stand as comments; uncommented they must be known and of the right type.
    whole = re.sub(r"^# (\w+ = )", r"\1", text, flags=re.MULTILINE)
    without_event = re.sub(r"^event = .*\n", "", whole, flags=re.MULTILINE)
    every = dict(_flat(tomllib.loads(without_event))) | {"input.event": ""}
    fields = {
        f"{section}.{name}" if section else name
        for section, settings in (
            (n, getattr(Job(), n)) for n in Job.__dataclass_fields__ if n not in ("seed", "planned")
        )
        for name in settings.__dataclass_fields__
    }
    nested = {name.split(".")[0] + "." + name.split(".")[1] for name in every if "." in name}
    assert nested == fields


@pytest.mark.parametrize("uncommented", [False, True])
def test_template_is_a_job(tmp_path, uncommented):
    text = TEMPLATE.read_text(encoding="utf-8")
    if uncommented:
        text = re.sub(r"^# (\w+ = )", r"\1", text, flags=re.MULTILINE)
    path = tmp_path / "job.toml"
    path.write_text(text, encoding="utf-8")
    job = read_job(path)
    assert (job == Job()) is not uncommented


@pytest.mark.parametrize("name", ["resolve", "siting"])
def test_template_of_a_study_is_a_job_with_planned_sites(name, tmp_path):
    path = tmp_path / "job.toml"
    text = (TEMPLATE.parent / f"{name}.toml").read_text(encoding="utf-8")
    path.write_text(re.sub(r"^# (trace = )", r"\1", text, flags=re.MULTILINE), encoding="utf-8")
    job = read_job(path)
    assert len(job.planned) >= 2
    assert job.input.trace.endswith("fault.geojson")
    assert job.resolve == Job().resolve


@pytest.mark.parametrize("path", sorted((ROOT / "workflows").glob("*.toml")), ids=lambda p: p.stem)
def test_workflow_is_a_job(path):
    job = read_job(path)
    assert (job.input.records and job.input.inventory) or job.planned
