"""The job file: one table per stage, each table one settings dataclass of that stage."""

from __future__ import annotations

import difflib
import tomllib
import types
import typing
from collections.abc import Mapping
from dataclasses import MISSING, fields, is_dataclass
from pathlib import Path
from typing import Any

from rupture.errors import InputError


def nearest_key(key: str, known: typing.Iterable[str]) -> str:
    """Return ' (did you mean ...?)' for the nearest known key, or the list of the known ones.

    Examples
    --------
    >>> nearest_key("spacng_km", ["spacing_km", "depth_km"])
    " (did you mean 'spacing_km'?)"
    """
    names = sorted(known)
    close = difflib.get_close_matches(key, names, n=1)
    return f" (did you mean '{close[0]}'?)" if close else f" (known: {', '.join(names)})"


def read_toml(path: str | Path) -> dict[str, Any]:
    """Read a TOML file; errors name the file and the line."""
    path = Path(path)
    try:
        return tomllib.loads(path.read_text(encoding="utf-8"))
    except FileNotFoundError:
        raise InputError(f"{path}: no such job file") from None
    except (OSError, UnicodeDecodeError) as error:
        raise InputError(f"{path}: cannot be read as a text file ({error})") from error
    except tomllib.TOMLDecodeError as error:
        raise InputError(f"{path}: not valid TOML: {error}") from error


def settings_from_table(cls: Any, table: Mapping[str, Any], where: str) -> Any:
    """Build a settings dataclass from a TOML table.

    Parameters
    ----------
    cls
        A frozen dataclass whose fields are plain types, tuples of them, or dataclasses (sub-tables).
    table
        The table.
    where
        File and table for messages.

    Raises
    ------
    InputError
        All unknown keys and wrong types of the table at once.
    """
    from pydantic import ConfigDict, TypeAdapter, ValidationError

    hints = typing.get_type_hints(cls)
    known = {f.name: f for f in fields(cls) if f.init}
    wrong = [f"{where}: unknown key '{key}'{nearest_key(key, known)}" for key in table if key not in known]
    values: dict[str, Any] = {}
    for key, value in table.items():
        if key not in known:
            continue
        nested: Any = next((t for t in _members(hints[key]) if is_dataclass(t)), None)
        if nested is not None and isinstance(value, Mapping):
            try:
                values[key] = settings_from_table(nested, value, f"{where}.{key}")
            except InputError as error:
                wrong.append(str(error))
            continue
        try:
            # TOML has no tuple: arrays become tuples here; nothing else is converted silently.
            adapter = TypeAdapter(hints[key], config=ConfigDict(arbitrary_types_allowed=True))
            values[key] = adapter.validate_python(_tuples(value), strict=True)
        except ValidationError as error:
            wrong.append(f"{where}: '{key}' = {value!r}: {error.errors()[0]['msg'].lower()}")
    missing = [
        f.name for f in known.values() if f.default is MISSING and f.default_factory is MISSING and f.name not in table
    ]
    wrong += [f"{where}: the key '{name}' is missing" for name in missing]
    if wrong:
        raise InputError("\n".join(wrong))
    return cls(**values)


def _members(hint: Any) -> tuple[Any, ...]:
    if typing.get_origin(hint) in (typing.Union, types.UnionType):
        return typing.get_args(hint)
    return (hint,)


def _tuples(value: Any) -> Any:
    return tuple(_tuples(v) for v in value) if isinstance(value, list) else value
