"""The command line: thin, lazy, and kind to people who mistype."""

from __future__ import annotations

import argparse
import sys
import warnings
from collections.abc import Callable, Sequence
from importlib import import_module

from rupture import __version__
from rupture.errors import RecordWarning, RuptureError

_EPILOG = (
    "Research tool: not for warning or life-safety decisions; the authorised agencies and licensed practice decide."
)


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the command line and return its exit status: 0 done, 1 the data cannot answer, 2 wrong use or input."""
    options = build_parser().parse_args(arguments)
    module, _, function = options.run.partition(":")
    command: Callable[[argparse.Namespace], int] = getattr(import_module(module), function)
    try:
        with warnings.catch_warnings():
            # What was left out of the records is told as a sentence, not as a line of code.
            warnings.simplefilter("always", RecordWarning)
            shown = warnings.showwarning
            warnings.showwarning = lambda message, category, *rest: (
                print(f"rupture {options.command}: {message}", file=sys.stderr)
                if issubclass(category, RecordWarning)
                else shown(message, category, *rest)
            )
            return command(options)
    except RuptureError as error:
        print(f"rupture {options.command}: {error}", file=sys.stderr)
        return error.exit_code
    except BrokenPipeError:
        # The reader of our stdout went away (for example `| head`); there is nobody to tell.
        sys.stderr.close()
        return 0
    except KeyboardInterrupt:
        print(f"rupture {options.command}: stopped; nothing was left half-written", file=sys.stderr)
        return 130


def build_parser() -> argparse.ArgumentParser:
    """Return the parser of all commands (also read by the documentation)."""
    parser = argparse.ArgumentParser(
        prog="rupture",
        description="Follow an earthquake rupture from the records of a few six-component sites.",
        epilog=_EPILOG,
    )
    parser.add_argument("--version", action="version", version=f"rupture {__version__}")
    commands = parser.add_subparsers(dest="command", required=True, metavar="COMMAND")

    demo = _command(
        commands,
        "demo",
        "an invented earthquake, end to end: files written, read back, tracked",
        "rupture.commands:demo",
    )
    _out(demo)
    _null_tests(demo)
    _energy(demo)

    track = _command(
        commands,
        "track",
        "direction, speed and length of a rupture, with movie, figures and report",
        "rupture.commands:track",
    )
    _inputs(track)
    _map(track)
    _energy(track)
    _null_tests(track)
    _out(track)
    track.add_argument("--json", action="store_true", help="print summary.json on stdout instead of sentences")

    direction = _command(
        commands,
        "direction",
        "each site's back-azimuth through time; one site is enough",
        "rupture.commands:direction",
    )
    _inputs(direction)
    _out(direction)
    direction.add_argument("--json", action="store_true", help="print the summary on stdout as JSON")

    check = _command(commands, "check", "quality table of the records; no tracking", "rupture.commands:check")
    _inputs(check)
    check.add_argument("--json", action="store_true", help="print the table as JSON")
    check.add_argument("--quiet", action="store_true", help="no progress on stderr")

    simulate = _command(
        commands,
        "simulate",
        "synthetic six-component records as miniSEED, StationXML and QuakeML",
        "rupture.commands:simulate",
    )
    simulate.add_argument("scenario", metavar="SCENARIO.toml", help="scenario file, or the name of a ready one")
    simulate.add_argument("--seed", type=int, help="seed of all random numbers (wins over the file)")
    _out(simulate)

    resolve = _command(
        commands, "resolve", "what these sites, real or planned, could have resolved", "rupture.planning:resolve"
    )
    _inputs(resolve)
    resolve.add_argument("--trace", metavar="FILE", help="fault trace (GeoJSON LineString): ruptures run along it")
    _out(resolve)
    group = resolve.add_argument_group("study (wins over [resolve.study] of the job file)")
    group.add_argument("--ruptures", type=int, metavar="N", help="synthetic ruptures per magnitude and noise factor")
    group.add_argument("--at-magnitude", nargs="+", type=float, metavar="M", help="magnitudes; by default the event's")
    group.add_argument(
        "--noise-factor", nargs="+", type=float, metavar="F", help="rotation noise relative to that of the sites"
    )
    group.add_argument("--leave-one-out", action="store_true", help="again without each site in turn")
    group.add_argument("--workers", type=int, metavar="N", help="processes on this machine")
    group.add_argument("--scheduler", metavar="ADDRESS", help="use an existing Dask scheduler")
    resolve.add_argument("--json", action="store_true", help="print resolution.json on stdout instead of sentences")

    siting = _command(commands, "siting", "where one more site helps most", "rupture.planning:siting")
    _inputs(siting)
    siting.add_argument("--trace", metavar="FILE", help="fault trace (GeoJSON LineString): ruptures run along it")
    _out(siting)
    places = siting.add_mutually_exclusive_group(required=True)
    places.add_argument(
        "--candidates", metavar="FILE", help="places: CSV (code, longitude_deg, latitude_deg, cost) or GeoJSON points"
    )
    places.add_argument(
        "--candidate-grid",
        nargs=2,
        type=float,
        metavar=("KM", "KM"),
        help="half width and spacing of a grid around the epicentre",
    )
    siting.add_argument("--next", type=int, default=3, metavar="N", help="how many sites to choose (default 3)")
    siting.add_argument(
        "--components", default="6C", choices=["6C", "3C+rotZ", "Z+rotH"], help="what a new site records (default 6C)"
    )
    siting.add_argument("--json", action="store_true", help="print the ranking as JSON")

    template = _command(commands, "template", "a commented job or scenario file on stdout", "rupture.commands:template")
    template.add_argument("kind", choices=["track", "simulate", "resolve", "siting"], help="which file")

    redraw = _command(
        commands,
        "redraw",
        "pictures, movie and report again from a result; nothing recomputed",
        "rupture.commands:redraw",
    )
    redraw.add_argument("result", metavar="RESULT.nc", help="result.nc of a run")
    redraw.add_argument("--style", metavar="FILE", help="Matplotlib style file that is laid over the project's own")
    redraw.add_argument(
        "--overlay", nargs="+", default=[], metavar="FILE", help="GeoJSON of fault traces or aftershocks for the maps"
    )
    redraw.add_argument(
        "--formats",
        nargs="+",
        default=["png", "pdf"],
        choices=["png", "pdf", "svg"],
        help="formats of the figures (default png pdf)",
    )
    redraw.add_argument(
        "--columns",
        type=int,
        default=2,
        choices=[1, 2],
        help="width of the figures in columns of a journal (default 2)",
    )
    redraw.add_argument(
        "--movie-shape", default="4:3", choices=["4:3", "16:9", "square"], help="shape of the movies (default 4:3)"
    )
    redraw.add_argument(
        "--movie-format", default="mp4", choices=["mp4", "webp", "gif"], help="format of the movies (default mp4)"
    )
    _out(redraw)
    return parser


def _command(commands: argparse._SubParsersAction, name: str, text: str, run: str) -> argparse.ArgumentParser:
    parser = commands.add_parser(name, help=text, description=text[0].upper() + text[1:] + ".", epilog=_EPILOG)
    parser.set_defaults(run=run)
    return parser


def _out(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("--out", metavar="DIR", required=True, help="folder for what the run leaves")
    parser.add_argument("--overwrite", action="store_true", help="replace the files of an earlier run in that folder")
    parser.add_argument("--quiet", action="store_true", help="no progress on stderr")


def _inputs(parser: argparse.ArgumentParser) -> None:
    group = parser.add_argument_group("input (wins over the job file)")
    parser.add_argument("job", nargs="?", metavar="JOB.toml", help="job file; see `rupture template track`")
    group.add_argument(
        "--records",
        nargs="+",
        action="extend",
        metavar="GLOB",
        help="record files, folders or globs (anything ObsPy reads)",
    )
    group.add_argument("--inventory", nargs="+", action="extend", metavar="FILE", help="StationXML")
    group.add_argument("--event", metavar="FILE", help="QuakeML")
    group.add_argument(
        "--origin",
        nargs=4,
        metavar=("TIME", "LON", "LAT", "DEPTH"),
        help="origin in place of --event: UTC time, degrees, km",
    )
    group.add_argument("--magnitude", type=float, metavar="M", help="moment magnitude, where the event has none")
    group.add_argument(
        "--mechanism",
        nargs=3,
        type=float,
        metavar=("STRIKE", "DIP", "RAKE"),
        help="focal mechanism in degrees",
    )
    group.add_argument(
        "--earth",
        metavar="MODEL",
        help="uniform:SPEED (S, km/s), iasp91, ak135, prem, an .nd file, or a .csv file of travel times",
    )
    group.add_argument(
        "--band",
        nargs=2,
        type=float,
        action="append",
        metavar=("LOW", "HIGH"),
        help="frequency band in Hz; repeat for more",
    )
    group.add_argument(
        "--array",
        nargs="+",
        action="append",
        metavar="STATION",
        help="stations (NET.STA) that together make one site; repeat for more",
    )
    group.add_argument("--seed", type=int, metavar="N", help="seed of all random numbers")


def _map(parser: argparse.ArgumentParser) -> None:
    group = parser.add_argument_group("map")
    group.add_argument("--trace", metavar="FILE", help="fault trace (GeoJSON LineString): follow the front along it")
    group.add_argument(
        "--half-width",
        type=float,
        metavar="KM",
        help="half width of the map grid; default from the magnitude",
    )
    group.add_argument("--spacing", type=float, metavar="KM", help="distance between cells")


def _energy(parser: argparse.ArgumentParser) -> None:
    parser.add_argument(
        "--no-energy", action="store_true", help="skip the energy inversion; the ray stack alone then answers"
    )


def _null_tests(parser: argparse.ArgumentParser) -> None:
    group = parser.add_argument_group("null tests")
    group.add_argument("--null-tests", type=int, metavar="N", help="number of synthetic ruptures")
    group.add_argument("--no-null-tests", action="store_true", help="skip them; the summary then says so")


if __name__ == "__main__":
    sys.exit(main())
