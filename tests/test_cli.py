"""The command line: every command answers, mistakes are told, nothing heavy is loaded to say so."""

import json
import subprocess
import sys

import pytest

from rupture.cli import build_parser, main

COMMANDS = ("demo", "track", "direction", "check", "simulate", "resolve", "siting", "template", "redraw")


def test_the_commands_are_those_of_the_documentation():
    (commands,) = [a for a in build_parser()._actions if a.dest == "command"]
    assert tuple(commands.choices) == COMMANDS


@pytest.mark.parametrize("command", COMMANDS)
def test_help_names_the_caution_and_every_option(command, capsys):
    with pytest.raises(SystemExit) as stop:
        main([command, "--help"])
    assert stop.value.code == 0
    text = " ".join(capsys.readouterr().out.split())
    assert "not for warning or life-safety decisions" in text
    (commands,) = [a for a in build_parser()._actions if a.dest == "command"]
    for action in commands.choices[command]._actions:
        assert action.help, f"{command} {action.dest}"


@pytest.mark.parametrize(
    "arguments",
    [[], ["unknown"], ["track"], ["track", "--out"], ["siting", "--out", "x"], ["template", "nothing"], ["simulate"]],
)
def test_wrong_use_exits_with_2(arguments, capsys):
    with pytest.raises(SystemExit) as stop:
        main(arguments)
    assert stop.value.code == 2
    assert "usage: rupture" in capsys.readouterr().err


@pytest.mark.parametrize("kind", ["track", "simulate", "resolve", "siting"])
def test_template_goes_to_stdout(kind, capsys):
    assert main(["template", kind]) == 0
    out, err = capsys.readouterr()
    assert out.startswith("#")
    assert not err


@pytest.mark.parametrize(
    "arguments",
    [
        ["redraw", "nothing.nc"], ["track", "nothing.toml"], ["simulate", "nothing.toml"], ["resolve", "nothing.toml"],
        ["siting", "nothing.toml", "--candidate-grid", "100", "50"], ["direction", "--records", "nothing/*.mseed"],
    ],
)  # fmt: skip
def test_files_that_are_not_there(arguments, tmp_path, capsys, monkeypatch):
    monkeypatch.chdir(tmp_path)
    assert main([*arguments, "--out", "out"]) == 2
    err = capsys.readouterr().err
    assert err.startswith(f"rupture {arguments[0]}: ")
    assert "Traceback" not in err
    assert list(tmp_path.iterdir()) == []


def test_interrupted_by_the_keyboard(monkeypatch, capsys):
    import rupture.commands

    def stopped(options):
        raise KeyboardInterrupt

    monkeypatch.setattr(rupture.commands, "demo", stopped)
    assert main(["demo", "--out", "x"]) == 130
    assert "nothing was left half-written" in capsys.readouterr().err


def test_help_loads_nothing_heavy():
    """Time is what counts (under 0.4 s), but a clock in a test lies on a busy machine: what costs the time is not loaded."""
    code = (
        "import sys, json\n"
        "from rupture.cli import build_parser\n"
        "build_parser().format_help()\n"
        "print(json.dumps(sorted({m.split('.')[0] for m in sys.modules})))"
    )
    out = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout
    heavy = {"numpy", "scipy", "obspy", "matplotlib", "xarray", "cartopy", "numba", "pydantic", "dask", "pyproj"}
    assert not heavy & set(json.loads(out))
