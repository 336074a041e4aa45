"""Make docs/validation_table.md: `rupture track` on full-wavefield records of ruptures that are known.

Run as `python docs/generate_validation.py`; takes some minutes. The records come from wavenumber integration in the
scenario's Earth, with coda and noise as the scenario says; the tracker believes in ak135 and knows nothing of the source.
"""

from __future__ import annotations

import json
import sys
import tempfile
from dataclasses import replace
from pathlib import Path

from rupture.progress import Progress
from rupture.settings import InputSettings, Job, NullTestSettings
from rupture.synthetic import read_scenario
from rupture.synthetic.simulate import simulate
from rupture.tracking import run_track

SCENARIOS = ("unilateral", "bilateral", "supershear", "stationary")
TABLE = Path(__file__).parent / "validation_table.md"


def main() -> None:
    """Simulate, track, and write the table."""
    lines = [
        "| rupture | engine | coda | kind found (probability) | direction (deg): true, found | speed (km/s): true, found | length (km): true, found |",
        "| --- | --- | --- | --- | --- | --- | --- |",
    ]
    for name in sys.argv[1:] or SCENARIOS:
        with tempfile.TemporaryDirectory() as folder:
            scenario = read_scenario(name, engine="wavefield")
            files = simulate(scenario, Path(folder) / "input", Progress(quiet=True))
            given = InputSettings((str(files.records[0].parent),), (str(files.inventory),), str(files.event))
            job = replace(Job(input=given), null_tests=NullTestSettings(0))
            found = run_track(job, Progress()).summary["rupture"]
            truth = json.loads(files.truth.read_text(encoding="utf-8"))["rupture"]
        likely = max(found["kind_probability"], key=found["kind_probability"].get)
        cells = [
            name,
            scenario.engine,
            f"{scenario.coda.energy_ratio:g}",
            f"{found['kind']} ({likely} {found['kind_probability'][likely]:.0%})",
        ]
        for key, digits in (("direction_deg", 0), ("speed_km_s", 1), ("length_km", 0)):
            true = "none" if truth.get(key) is None else f"{truth[key]:.{digits}f}"
            value = found[key]
            answer = (
                "none"
                if value is None
                else f"{value['best']:.{digits}f} ({value['p05']:.{digits}f} to {value['p95']:.{digits}f})"
            )
            cells.append(f"{true}; {answer}")
        if found["second_arm"]:
            arm = found["second_arm"]
            cells[-3] += f"; second arm {arm['direction_deg']['best']:.0f}"
            cells[-1] += f"; second arm {arm['length_km']['best']:.0f}"
        lines.append("| " + " | ".join(cells) + " |")
        print(lines[-1], flush=True)
    TABLE.write_text("\n".join(lines) + "\n", encoding="utf-8")


if __name__ == "__main__":
    main()
