"""What is wrong with a scenario, in sentences that name the key."""

from __future__ import annotations

import difflib
import typing
from typing import Any

from pydantic import BaseModel, ValidationError

_KINDS = {
    "float_type": "must be a number",
    "int_type": "must be a whole number",
    "int_from_float": "must be a whole number",
    "string_type": "must be a text in quotes",
    "bool_type": "must be true or false",
    "datetime_type": "must be a time such as 2031-05-14T03:21:07Z, without quotes",
    "tuple_type": "must be a list in brackets",
    "string_pattern_mismatch": "may hold only capital letters and digits, and not more of them than miniSEED has room for",
    "model_type": "must be a table",
    "model_attributes_type": "must be a table",
}


def sentences(error: ValidationError, model: type[BaseModel], where: str) -> list[str]:
    """Return one sentence for each fault that pydantic found; unknown keys come with the nearest known one.

    Parameters
    ----------
    error
        All faults.
    model
        The model that was validated.
    where
        File for messages.
    """
    out: dict[str, str] = {}
    for item in error.errors():
        path = [p for p in item["loc"] if not (isinstance(p, str) and _is_branch(p))]
        key = _key(path)
        if item["type"] == "extra_forbidden":
            names = _names(model, path[:-1])
            close = difflib.get_close_matches(str(path[-1]), names, n=1)
            hint = f" (did you mean '{close[0]}'?)" if close else f" (known: {', '.join(sorted(names))})"
            text = f"{where}: unknown key '{key}'{hint}"
        elif item["type"] == "too_short" and item["input"]:
            continue  # entries were given, each with a fault of its own that is listed
        elif item["type"] == "union_tag_invalid":
            known = [name.strip("' ") for name in item["ctx"]["expected_tags"].split(",")]
            close = difflib.get_close_matches(item["ctx"]["tag"], known, n=1)
            hint = f" (did you mean '{close[0]}'?)" if close else f" (known: {', '.join(known)})"
            text = f"{where}: '{key}.kind' = '{item['ctx']['tag']}' is no kind of fault{hint}"
        elif item["type"] in {"missing", "union_tag_not_found"}:
            key = f"{key}.kind" if item["type"] == "union_tag_not_found" else key
            text = f"{where}: the key '{key}' is missing"
        elif item["type"] == "value_error":
            text = f"{where}: {key + ': ' if key else ''}{item['ctx']['error']}"
        else:
            said = _KINDS.get(item["type"], item["msg"][0].lower() + item["msg"][1:])
            text = f"{where}: '{key}' = {_short(item['input'])} {said.replace('input ', '')}"
        # Unions report one fault for each branch; the first speaks for all.
        out.setdefault(f"{key} {item['type'] == 'extra_forbidden'}", text)
    return list(out.values())


def _short(value: Any) -> str:
    """Return a value as the file shows it, cut where it is long."""
    text = repr(list(value) if isinstance(value, tuple) else value)
    return text if len(text) <= 60 else text[:57] + "..."


def _is_branch(part: str) -> bool:
    """Whether a part of a location is pydantic's name of a union branch and no key of the file."""
    return part.startswith(("tuple[", "function-", "constrained")) or part in {
        "float", "int", "str", "turned", "reversed", "swapped", "late", "gain", "clipped", "gappy", "dead",
    }  # fmt: skip


def _key(path: list[Any]) -> str:
    text = ""
    for part in path:
        text += f"[{part + 1}]" if isinstance(part, int) else f"{'.' if text else ''}{part}"
    return text


def _names(model: type[BaseModel], path: list[Any]) -> list[str]:
    """Return the known keys of the table at a path."""
    tables: list[type[BaseModel]] = [model]
    for part in path:
        if isinstance(part, int):
            continue
        hints = [t.model_fields[part].annotation for t in tables if part in t.model_fields]
        tables = [m for hint in hints for m in _models(hint)]
    return sorted({name for t in tables for name in t.model_fields})


def _models(hint: Any) -> list[type[BaseModel]]:
    if isinstance(hint, type) and issubclass(hint, BaseModel):
        return [hint]
    return [m for part in typing.get_args(hint) for m in _models(part)]
