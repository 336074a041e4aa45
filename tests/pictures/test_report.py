"""The report page: one file, text never markup, small enough."""

import json
import re
from collections.abc import Callable
from html.parser import HTMLParser
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from rupture.pictures import write_report
from rupture.pictures.page_data import _block_mean
from rupture.pictures.report import report_html, script_safe
from rupture.result import Result
from rupture.wording import CAUTIONS, answer_sentences

EVIL = '<img src=x onerror="alert(1)"></script><script>alert(2)</script>&amp;'


class Page(HTMLParser):
    """Elements, their attributes and the text that a reader sees."""

    def __init__(self, text: str) -> None:
        super().__init__()
        self.tags: list[tuple[str, dict[str, str | None]]] = []
        self.texts: list[str] = []
        self.scripts: list[str] = []
        self.feed(text)

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.append((tag, dict(attrs)))

    def handle_data(self, data: str) -> None:
        (self.scripts if self.tags and self.tags[-1][0] in ("script", "style") else self.texts).append(data)


def data_of(page: str) -> dict[str, Any]:
    found = re.search(r'<script type="application/json" id="data">(.*?)</script>', page, re.DOTALL)
    assert found is not None
    return json.loads(found[1])


def test_page_holds_answer_cautions_settings_and_provenance(unilateral: Result, tmp_path: Path) -> None:
    path = write_report(unilateral, tmp_path / "report.html")
    assert [p.name for p in tmp_path.iterdir()] == ["report.html"]
    page = Page(path.read_text(encoding="utf-8"))
    words = " ".join(page.texts)
    for sentence in (*CAUTIONS, *answer_sentences(unilateral.summary)):
        assert sentence in words
    assert "On 60 null tests" in words
    assert "uniform:3.5" in words
    assert "0" * 64 in words
    assert "horizontal channels clipped" in words
    assert "ZX.R01..HJE" in words
    assert "@@" not in words


def test_page_asks_for_nothing_outside_itself(unilateral: Result) -> None:
    page = Page(report_html(unilateral))
    for tag, attributes in page.tags:
        assert tag not in ("link", "iframe", "object", "embed", "base"), tag
        for name in ("src", "href", "action", "data", "poster"):
            if name in attributes:
                assert str(attributes[name]).startswith("#"), (tag, attributes)
    policy = next(
        a["content"] for t, a in page.tags if t == "meta" and a.get("http-equiv") == "Content-Security-Policy"
    )
    assert policy is not None
    assert "default-src 'none'" in policy
    assert "connect-src" not in policy


def test_names_are_text_never_markup(build: Callable[..., Result]) -> None:
    clean = Page(report_html(build(sites=2, cells=11, names=["A", "B"])))
    result = build(sites=2, cells=11, names=[EVIL, "@@DATA@@"])
    result.summary["event"]["name"] = EVIL
    result.summary["sites"][0]["reason"] = EVIL
    result.quality[0]["missing"] = EVIL
    result.settings["earth"] = EVIL
    html = report_html(result)
    page = Page(html)
    # The same elements, whatever the names are.
    assert [tag for tag, _ in page.tags] == [tag for tag, _ in clean.tags]
    assert not any("onerror" in attributes for _, attributes in page.tags)
    assert data_of(html)["sites"][0]["code"] == EVIL
    assert EVIL in page.texts[0] or any(EVIL in text for text in page.texts)
    assert html.count('id="data"') == 1


def test_script_safe_survives_the_round_trip() -> None:
    value = {"a": EVIL + "\u2028\u2029", "b": [1, None, 2.5]}
    text = script_safe(value)
    assert json.loads(text) == value
    assert not set("<>&\u2028\u2029") & set(text)
    with pytest.raises(ValueError, match="JSON"):
        script_safe({"a": float("nan")})


def unpack(field: dict[str, Any], kind: Any = np.uint8) -> np.ndarray:
    import base64
    import zlib

    return np.frombuffer(zlib.decompress(base64.b64decode(field)), kind) if isinstance(field, str) else np.empty(0)


def test_packed_movie_is_true_to_a_percent(unilateral: Result) -> None:
    data = data_of(report_html(unilateral))
    field = data["fields"][0]
    assert field["block"] == 1
    packed = unpack(field["image"]).reshape(len(data["times"]), *field["shape"])
    values = field["top"] * (packed / 255.0) ** 2
    assert unilateral.map is not None
    true = unilateral.map["smoothed_probability"].values
    high = true > 0.05 * true.max()
    assert np.abs(values[high] / true[high] - 1).max() < 0.02
    lon = unpack(field["cells"]["longitude"], "<i4") / 1e4
    assert lon == pytest.approx(unilateral.map["longitude"].values.ravel(), abs=1e-4)


def test_page_of_noise_on_a_large_grid_stays_below_ten_megabytes(build: Callable[..., Result]) -> None:
    # The worst case: 200 x 200 cells, 120 frames, nothing that deflates, two movies of it.
    result = build(cells=200, spacing_km=1.0, step_s=0.35)
    assert result.map is not None
    assert result.energy is not None
    frames = result.map.sizes["source_time"]
    assert frames >= 115
    rng = np.random.default_rng(1)
    noise = rng.random((frames, 200, 200)).astype("f4") ** 2
    result.map["smoothed_probability"].values[...] = noise / noise.sum(axis=(1, 2), keepdims=True)
    result.energy["energy"].values[...] = rng.random(result.energy["energy"].shape)
    page = report_html(result)
    assert len(page.encode()) < 10e6
    field = data_of(page)["fields"][0]
    assert field["block"] > 1
    coarse = unpack(field["image"]).reshape(frames, *field["shape"])
    block = field["block"]
    true = result.map["smoothed_probability"].values[3, :block, :block].mean()
    assert field["top"] * (coarse[3, 0, 0] / 255) ** 2 == pytest.approx(true, rel=0.02)


def test_block_mean_keeps_the_mean_at_ragged_edges() -> None:
    values = np.arange(2 * 5 * 7, dtype=float).reshape(2, 5, 7)
    coarse = _block_mean(values, 2)
    assert coarse.shape == (2, 3, 4)
    assert coarse[1, 0, 0] == values[1, :2, :2].mean()
    assert coarse[0, 2, 3] == values[0, 4, 6]


def test_directions_only_and_trace_results_have_a_page(build: Callable[..., Result], unilateral: Result) -> None:
    only = Result({**unilateral.summary, "rupture": None}, unilateral.sites, unilateral.direction)
    data = data_of(report_html(only))
    assert data["fields"] == []
    assert data["lagged"]
    assert data["times"][0] == 0.0
    assert all(site["panel"] for site in data["sites"])
    assert data_of(report_html(build(trace=True)))["fields"][0]["cells"]["trace"] is True


def test_a_direction_near_north_is_one_peak(build: Callable[..., Result]) -> None:
    data = data_of(report_html(build(azimuth_deg=359.0, cells=15)))
    item = next(p for p in data["posterior"] if p["name"] == "azimuth_deg")
    low, best, high = item["interval"]
    assert high - low < 20
    assert best % 360 == pytest.approx(359.0, abs=2.0)
    assert low < best < high


def test_a_field_with_its_own_grid_and_frames_is_shown_at_the_nearest_frame(unilateral: Result) -> None:
    data = data_of(report_html(unilateral))
    field = data["fields"][1]
    assert field["name"] == "energy"
    assert unilateral.energy is not None
    energy = unilateral.energy["energy"]
    assert field["shape"] == list(energy.shape[1:])
    assert field["shape"] != data["fields"][0]["shape"]
    packed = unpack(field["image"]).reshape(len(data["times"]), *field["shape"])
    frame = data["times"].index(12.0)
    true = energy.sel(source_time=12.0).values / float(energy.sum())
    assert field["top"] * (packed[frame] / 255.0) ** 2 == pytest.approx(true, abs=0.01 * float(true.max()))
    assert field["cells"]["edges"][0] == float(energy["easting"][0]) - 5.0
