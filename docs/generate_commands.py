"""Write docs/commands.md: every command with its options, as the command line itself states them.

Run `python docs/generate_commands.py` after a change of the command line; a test compares.
"""

from __future__ import annotations

import argparse
from pathlib import Path

from rupture.cli import build_parser

HEAD = """# Commands

Options given on the command line win over the job file. Progress goes to stderr, answers to stdout; exit status 0 means
done, 1 that the data cannot answer (a sentence says how), 2 wrong use or unreadable input. This page is written from the
command line itself by `python docs/generate_commands.py`.
"""


def page() -> str:
    """Return the page as Markdown."""
    (commands,) = [action for action in build_parser()._actions if isinstance(action, argparse._SubParsersAction)]
    summaries = {choice.dest: choice.help for choice in commands._choices_actions}
    parts = [HEAD]
    for name, parser in commands.choices.items():
        rows = [
            (_written(action), (action.help or "").replace("|", "\\|"))
            for action in parser._actions
            if not isinstance(action, argparse._HelpAction)
        ]
        lines = [
            f"## rupture {name}",
            "",
            f"{_sentence(summaries[name] or '')}",
            "",
            "| argument | meaning |",
            "| --- | --- |",
        ]
        lines += [f"| `{written}` | {meaning} |" for written, meaning in rows]
        parts.append("\n".join(lines) + "\n")
    return "\n".join(parts)


def _written(action: argparse.Action) -> str:
    names = action.metavar or action.dest.upper()
    if action.choices is not None:
        value = "{" + ",".join(map(str, action.choices)) + "}"
    elif isinstance(names, tuple):
        value = " ".join(names)
    elif isinstance(action.nargs, int) and action.nargs > 0:
        value = " ".join([names] * action.nargs)
    else:
        value = f"{names} ..." if action.nargs == "+" else names
    if not action.option_strings:
        return value
    return action.option_strings[-1] if action.nargs == 0 else f"{action.option_strings[-1]} {value}"


def _sentence(text: str) -> str:
    return text[:1].upper() + text[1:].rstrip(".") + "."


if __name__ == "__main__":
    Path(__file__).with_name("commands.md").write_text(page(), encoding="utf-8")
