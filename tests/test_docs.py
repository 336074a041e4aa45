"""What the documentation says can be done is done here: commands run, blocks are read, links lead somewhere.

Setting up (`python3 -m venv`, `pip install`) needs a package index and is run from the README's own fence by `.ci/run`;
here its extras are compared with pyproject.toml. Long commands get options added that shorten them (`SHORTER`).
"""

import importlib.util
import re
import shlex
import shutil
import tomllib
from pathlib import Path

import pytest

from rupture import pictures
from rupture.cli import build_parser, main
from rupture.result import Result
from rupture.settings import read_job

ROOT = Path(__file__).parents[1]
PAGES = [
    ROOT / "README.md",
    ROOT / "DEVELOPERS.md",
    *sorted((ROOT / "docs").glob("*.md")),
    *sorted((ROOT / "docs" / "jobs").glob("*.md")),
]
WORKFLOWS = sorted((ROOT / "workflows").glob("*.toml"))
QUICK = ["--quiet"]
SHORTER = {
    "demo": ["--no-null-tests", "--no-energy", *QUICK],
    "track": ["--no-null-tests", "--no-energy", *QUICK],
    "direction": QUICK,
    "check": QUICK,
    "simulate": QUICK,
    "resolve": ["--ruptures", "3", *QUICK],
    "siting": QUICK,
    "redraw": QUICK,
    "template": [],
}


def relative(path: Path) -> str:
    return str(path.relative_to(ROOT))


def blocks(page: Path, language: str) -> list[str]:
    """Fenced blocks of a language."""
    return re.findall(rf"^```{language}\n(.*?)^```", page.read_text(encoding="utf-8"), flags=re.MULTILINE | re.DOTALL)


def spans(page: Path) -> list[str]:
    """Code spans outside of fenced blocks, broken lines joined."""
    text = re.sub(r"^```.*?^```", "", page.read_text(encoding="utf-8"), flags=re.MULTILINE | re.DOTALL)
    return [" ".join(span.split()) for span in re.findall(r"`([^`]+)`", text)]


def shell_commands(page: Path) -> list[list[str]]:
    """Every command of the page's shell blocks, split into words."""
    lines = "\n".join(blocks(page, "sh")).replace("\\\n", " ").splitlines()
    return [shlex.split(part, comments=True) for line in lines for part in line.split("&&") if part.strip()]


def rupture_commands() -> dict[str, str]:
    """Every `rupture ...` with arguments in pages and job files, and where it stands first; README before the rest."""
    found: dict[str, str] = {}
    for page in PAGES:
        for words in shell_commands(page):
            if Path(words[0]).name == "rupture":
                found.setdefault(shlex.join(words[1:]), relative(page))
        for span in spans(page):
            words = shlex.split(span) if span.startswith("rupture ") else []
            if len(words) > 2 or words[1:2] in (["--help"], ["--version"]):
                found.setdefault(shlex.join(words[1:]), relative(page))
    for job in WORKFLOWS:
        for line in re.findall(r"^#\s+(rupture .*)$", job.read_text(encoding="utf-8"), flags=re.MULTILINE):
            found.setdefault(shlex.join(shlex.split(re.sub(r"\s\(.*\)$", "", line))[1:]), relative(job))
    return found


COMMANDS = rupture_commands()


def test_every_job_of_the_program_is_shown() -> None:
    shown = {shlex.split(command)[0] for command in COMMANDS}
    assert shown >= set(SHORTER)


@pytest.mark.parametrize("page", PAGES, ids=relative)
def test_other_commands_exist(page: Path) -> None:
    extras = tomllib.loads((ROOT / "pyproject.toml").read_text())["project"]["optional-dependencies"]
    for words in shell_commands(page):
        program = Path(words[0]).name
        assert program in ("python3", "python", "pip", "rupture"), words
        if program == "pip":
            asked = [word for word in words[1:] if not word.startswith("-")]
            assert asked[0] == "install"
            for package in asked[1:]:
                assert re.fullmatch(r"(\.|rupture-backtrack)(\[[a-z,]+\])?", package), words
                assert set(re.findall(r"[a-z]+", package.partition("[")[2])) <= set(extras), words
    for span in spans(page):
        for script in re.findall(r"^(?:bash |python )((?:\.ci|docs|tests|benchmarks|examples)/\S+)", span):
            assert (ROOT / script).is_file(), span
        for group in re.findall(r"\[([a-z,]+)\]'?$", span) if "pip install" in span else []:
            assert set(group.split(",")) <= set(extras), span


@pytest.fixture(scope="module")
def workspace(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A folder with everything that the pages name, small: three sites of the ready scenario."""
    folder = tmp_path_factory.mktemp("workspace")
    shutil.copytree(ROOT / "workflows", folder / "workflows", ignore=shutil.ignore_patterns("data"))
    assert main(["simulate", "demo", "--out", str(folder / "made"), "--quiet"]) == 0
    made = folder / "made"
    files = sorted((made / "records").iterdir())
    sites = sorted({file.name.split(".")[1][:4] for file in files})
    for file in files:
        if file.name.split(".")[1][:4] not in sites[:2] + sites[-1:]:
            file.unlink()
    shutil.copytree(made / "records", folder / "waveforms")
    shutil.copy(made / "inventory.xml", folder / "stations.xml")
    shutil.copy(made / "event.xml", folder / "event.xml")
    (folder / "my.mplstyle").write_text("axes.titlesize: 9\n", encoding="utf-8")
    (folder / "places.csv").write_text(
        "code,longitude_deg,latitude_deg\nNEW1,134.2,-13.0\nNEW2,135.6,-14.4\n", encoding="utf-8"
    )
    return folder


def test_every_command_does_what_it_says(
    workspace: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    """In the order of the pages, in one folder, so that one command may use what another left."""
    monkeypatch.chdir(workspace)
    # Figures and movies are drawn by tests of their own; here the data beside them stand for them.
    monkeypatch.setattr(pictures, "draw_everything", _tables_alone)
    for command, page in sorted(COMMANDS.items(), key=_order):
        words = shlex.split(command)
        if words[0].startswith("-"):
            with pytest.raises(SystemExit) as stop:
                main(words)
            assert stop.value.code == 0
            continue
        if words[:2] == ["simulate", "demo"]:
            # The whole network was made once; the small one takes its place.
            assert build_parser().parse_args(words).out == "workflows/data"
            shutil.copytree(workspace / "made", workspace / "workflows" / "data")
            continue
        again = [] if "--out" not in words or not Path(words[words.index("--out") + 1]).exists() else ["--overwrite"]
        if words[:2] == ["track", "job.toml"]:
            shutil.copy("run/job.toml", "job.toml")
            again = ["--out", "repeated"]
        status = main([*words, *SHORTER[words[0]], *again])
        said = capsys.readouterr()
        assert status == 0, f"{page}: rupture {command}\n{said.err}"
    run = sorted(path.name for path in (workspace / "run").iterdir())
    table = (ROOT / "docs" / "start.md").read_text(encoding="utf-8")
    # No energy was inverted here: what it leaves is not there.
    told = [
        cell
        for cell, meaning in re.findall(r"^\| (`.*?) \| (.*) \|$", table, flags=re.MULTILINE)
        if "where it ran" not in meaning
    ]
    assert run == sorted(name.strip("/") for cell in told for name in re.findall(r"`([^`]+)`", cell))


def _tables_alone(result: Result, folder: Path, style: str | None = None, **options: object) -> None:
    pictures.draw_all(result, folder / "figures", style, formats=())
    pictures.write_report(result, folder / "report.html")
    if result.map is not None:
        (folder / "movie.mp4").touch()


def _order(item: tuple[str, str]) -> tuple[int, str]:
    """What makes the records comes first, what draws again or repeats comes last."""
    words = item[0].split()
    late = words[0] == "redraw" or words[:2] == ["track", "job.toml"]
    return (0 if words[0] == "simulate" else 2 if late else 1), item[1]


@pytest.mark.parametrize("page", PAGES, ids=relative)
def test_options_and_commands_exist(page: Path) -> None:
    """An option that a page names belongs to some command: pages do not outlive a change of the command line."""
    (commands,) = [action for action in build_parser()._actions if action.dest == "command"]
    known = {
        option for parser in commands.choices.values() for action in parser._actions for option in action.option_strings
    }
    foreign = {"--nthreads", "--version", "--fail-on-warning", "--check", "--keep-going"}
    for span in spans(page):
        words = span.split()
        if words[:1] == ["rupture"] and len(words) > 1 and not words[1].startswith("-"):
            assert words[1] in commands.choices, span
        if words[:1] == ["rupture"] or words[0].startswith("--"):
            assert {word for word in words if word.startswith("--")} <= known | foreign, span


def test_page_of_commands_is_what_the_command_line_states() -> None:
    spec = importlib.util.spec_from_file_location("generate_commands", ROOT / "docs" / "generate_commands.py")
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    written = (ROOT / "docs" / "commands.md").read_text(encoding="utf-8")
    assert written == module.page(), "run `python docs/generate_commands.py`"


TOML = [(page, block) for page in PAGES for block in blocks(page, "toml")]
PYTHON = [(page, block) for page in PAGES for block in blocks(page, "python")]


@pytest.mark.parametrize(("page", "block"), TOML, ids=lambda value: relative(value) if isinstance(value, Path) else "")
def test_toml_blocks_are_jobs(page: Path, block: str, tmp_path: Path) -> None:
    (tmp_path / "job.toml").write_text(block, encoding="utf-8")
    job = read_job(tmp_path / "job.toml")
    assert job.input.records


@pytest.mark.parametrize("path", WORKFLOWS, ids=relative)
def test_workflows_are_jobs(path: Path) -> None:
    told = tomllib.loads(path.read_text(encoding="utf-8"))
    job = read_job(path)
    assert job.seed == told.get("seed", job.seed)
    assert len(job.planned) == len(told.get("planned", []))


@pytest.mark.parametrize(
    ("page", "block"), PYTHON, ids=lambda value: relative(value) if isinstance(value, Path) else ""
)
def test_python_blocks_run(
    page: Path, block: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, small_result: Path
) -> None:
    code = compile(block, str(page), "exec")
    wanted = re.findall(r"^(?:from|import) (\w+)", block, flags=re.MULTILINE)
    missing = [name for name in wanted if importlib.util.find_spec(name) is None]
    if missing:
        # A batch system can only be asked on a cluster; nothing else may hide here.
        assert missing == ["dask_jobqueue"]
        return
    (tmp_path / "run").mkdir()
    shutil.copy(small_result, tmp_path / "run" / "result.nc")
    monkeypatch.chdir(tmp_path)
    exec(code, {"__name__": "documentation"})
    for name in re.findall(r"savefig\(\"(.+?)\"\)", block):
        assert (tmp_path / name).stat().st_size > 1000


@pytest.fixture(scope="module")
def small_result(tmp_path_factory: pytest.TempPathFactory) -> Path:
    spec = importlib.util.spec_from_file_location("fabricated", ROOT / "tests" / "pictures" / "fabricated.py")
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    path = tmp_path_factory.mktemp("result") / "result.nc"
    module.fabricated_result(cells=21, sites=3, step_s=4.0, spacing_km=9.0).save(path)
    return path


@pytest.mark.parametrize("page", PAGES, ids=relative)
def test_links_lead_somewhere(page: Path) -> None:
    text = page.read_text(encoding="utf-8")
    targets = re.findall(r"!?\[[^\]]*\]\(([^)\s]+)\)", text)
    targets += re.findall(r"^```\{(?:include|literalinclude)\} (\S+)", text, flags=re.MULTILINE)
    for target in targets:
        assert "://" not in target, f"{target}: pages link to nothing outside; cite author and year"
        place = target.partition("#")[0]
        assert (page.parent / place).exists(), f"{relative(page)} -> {target}"
    for tree in re.findall(r"^```\{toctree\}\n(.*?)^```", text, flags=re.MULTILINE | re.DOTALL):
        for entry in (line for line in tree.split("\n") if line and not line.startswith(":")):
            # The gallery's pages are written when the documentation is built.
            ready = entry.startswith("gallery/") or any(
                (page.parent / f"{entry}{suffix}").exists() for suffix in (".md", ".rst")
            )
            assert ready, f"{relative(page)}: {entry}"
    for span in spans(page):
        if re.fullmatch(r"(docs|tests|examples|workflows|rupture|benchmarks)/[\w./-]+", span) and "data" not in span:
            assert (ROOT / span).exists(), f"{relative(page)}: {span}"


def test_every_page_is_in_a_table_of_contents() -> None:
    index = (ROOT / "docs" / "index.md").read_text(encoding="utf-8")
    included = {name for page in PAGES for name in re.findall(r"\{include\} (\S+)", page.read_text(encoding="utf-8"))}
    for page in (ROOT / "docs").glob("**/*.md"):
        name = page.relative_to(ROOT / "docs")
        if name.parts[0] in ("gallery", "_build") or name.name in ("index.md", *included):
            continue
        assert f"\n{name.with_suffix('').as_posix()}\n" in index, f"docs/{name} cannot be reached"
