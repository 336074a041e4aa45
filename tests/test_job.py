from dataclasses import dataclass

import pytest

from rupture.errors import InputError
from rupture.job import read_toml, settings_from_table


@dataclass(frozen=True)
class _Inner:
    count: int = 3


@dataclass(frozen=True)
class _Settings:
    spacing_km: float = 5.0
    bands_hz: tuple[tuple[float, float], ...] | None = None
    name: str = "x"
    inner: _Inner = _Inner()


def test_values_and_defaults():
    table = {"spacing_km": 4, "bands_hz": [[0.1, 0.5]], "inner": {"count": 5}}
    assert settings_from_table(_Settings, table, "job.toml [map]") == _Settings(4.0, ((0.1, 0.5),), "x", _Inner(5))


def test_all_mistakes_of_a_table_are_told_at_once():
    table = {"spacng_km": 4, "name": 7, "bands_hz": [[0.1, "high"]], "inner": {"cuont": 5}}
    with pytest.raises(InputError) as error:
        settings_from_table(_Settings, table, "job.toml [map]")
    text = str(error.value)
    assert "unknown key 'spacng_km' (did you mean 'spacing_km'?)" in text
    assert "'name' = 7" in text
    assert "'bands_hz'" in text
    assert "job.toml [map].inner: unknown key 'cuont' (did you mean 'count'?)" in text


def test_a_number_in_quotes_is_not_a_number():
    with pytest.raises(InputError, match="spacing_km"):
        settings_from_table(_Settings, {"spacing_km": "4"}, "job.toml")


def test_broken_toml_names_file_and_line(tmp_path):
    path = tmp_path / "job.toml"
    path.write_text("[map]\nspacing_km = = 4\n")
    with pytest.raises(InputError, match=r"job\.toml: not valid TOML: .*line 2"):
        read_toml(path)
    with pytest.raises(InputError, match="no such job file"):
        read_toml(tmp_path / "none.toml")
