"""The report page in a real browser: it works, it is quiet, nothing leaves it."""

import importlib.util
import os
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from rupture.pictures import write_report
from rupture.result import Result

pytestmark = pytest.mark.browser

_spec = importlib.util.spec_from_file_location("pictures_browser", Path(__file__).with_name("browser.py"))
assert _spec is not None
assert _spec.loader is not None
browser_module = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(browser_module)


@pytest.fixture(scope="module")
def browser() -> Iterator[Any]:
    program = browser_module.find_chromium()
    if program is None:
        reason = "no Chromium on this machine; the report page was not tried in a browser"
        if os.environ.get("RUPTURE_REQUIRE_BROWSER"):
            pytest.fail(f"{reason}, and RUPTURE_REQUIRE_BROWSER is set")
        pytest.skip(reason)
    with browser_module.Browser(program) as opened:
        yield opened


@pytest.fixture(scope="module")
def path(unilateral: Result, tmp_path_factory: pytest.TempPathFactory) -> Path:
    return write_report(unilateral, tmp_path_factory.mktemp("page") / "report.html")


@pytest.fixture
def page(browser: Any, path: Path) -> Iterator[Any]:
    """The open page of the unilateral result; afterwards: no error, and no request but the file itself."""
    browser.requests.clear()
    browser.errors.clear()
    browser.open(path)
    yield browser
    browser.run("1")
    assert browser.errors == []
    assert browser.requests == [path.resolve().as_uri()]


PIXELS = "document.getElementById('map').toDataURL()"


def set_slider(page: Any, frame: int) -> None:
    page.run(
        f"(() => {{const s = document.getElementById('time'); s.value = {frame}; s.dispatchEvent(new Event('input', {{bubbles: true}}))}})()"
    )


def test_moving_the_slider_changes_map_clock_and_description(page: Any) -> None:
    set_slider(page, 6)
    before = (
        page.run(PIXELS),
        page.run("document.getElementById('clock').textContent"),
        page.run("document.getElementById('map').ariaLabel"),
    )
    set_slider(page, 25)
    after = (
        page.run(PIXELS),
        page.run("document.getElementById('clock').textContent"),
        page.run("document.getElementById('map').ariaLabel"),
    )
    assert all(a != b for a, b in zip(before, after, strict=True))
    assert after[1] == "+21.0 s · 2031-04-05 10:20:51.0 UTC"
    assert page.run("document.getElementById('time').getAttribute('aria-valuetext')") == after[1]
    set_slider(page, 6)
    assert page.run(PIXELS) == before[0]


def test_slider_and_sites_work_from_the_keyboard(page: Any) -> None:
    page.run("document.getElementById('time').focus()")
    first = int(page.run("document.getElementById('time').value"))
    page.key("ArrowRight")
    assert int(page.run("document.getElementById('time').value")) == first + 1
    page.run("document.querySelector('#site-buttons button').focus()")
    page.key("Enter")
    page.wait("!document.getElementById('site-section').hidden")
    assert page.run("document.activeElement.id") == "site-title"
    page.key("Escape")
    page.wait("document.getElementById('site-section').hidden")
    assert page.run("document.activeElement === document.querySelector('#site-buttons button')")


def test_a_site_opens_its_panel(page: Any) -> None:
    page.run("document.querySelectorAll('#site-buttons button')[2].click()")
    assert "ZX.R03" in page.run("document.getElementById('site-title').textContent")
    assert page.run("document.querySelectorAll('#site-buttons button')[2].getAttribute('aria-expanded')") == "true"
    # The heat map is there: pixels as dark as the dark end of the colours.
    darkest = page.run(
        "(() => {const c = document.querySelector('#site-chart canvas'), d = c.getContext('2d').getImageData(0, 0, c.width, c.height).data;"
        "let n = 0; for (let i = 0; i < d.length; i += 4) if (d[i + 2] > d[i] + 60 && d[i] < 60) n++; return n})()"
    )
    assert darkest > 200
    page.run("document.getElementById('site-close').click()")
    assert page.run("document.getElementById('site-section').hidden")


def test_hover_reads_the_cell(page: Any, unilateral: Result) -> None:
    assert unilateral.map is not None
    frame = 20
    set_slider(page, frame)
    values = unilateral.map["smoothed_probability"].values[frame]
    row, column = np.unravel_index(np.argmax(values), values.shape)
    x, y = float(unilateral.map["easting"][column]), float(unilateral.map["northing"][row])
    place = page.run(
        f"(() => {{const c = document.getElementById('map'); c.scrollIntoView(); const b = c.getBoundingClientRect();"
        f"const [w, e, s, n] = JSON.parse(document.getElementById('data').textContent).map.extent, k = c.clientWidth / (e - w);"
        f"return [b.left + 1 + ({x} - w) * k, b.top + 1 + (n - {y}) * k]}})()"
    )
    page.move_mouse(*place)
    text = page.run("document.getElementById('reading').textContent")
    assert "location probability per cell" in text
    assert float(text.split("per cell ")[1]) == pytest.approx(float(values[row, column]), rel=0.06)
    latitude = float(text.split("°")[0])
    assert latitude == pytest.approx(float(unilateral.map["latitude"][row, column]), abs=1e-3)


def test_arrow_keys_read_cells_too(page: Any) -> None:
    page.run("document.getElementById('map').focus()")
    page.key("ArrowRight")
    one = page.run("document.getElementById('reading').textContent")
    page.key("ArrowUp")
    two = page.run("document.getElementById('reading').textContent")
    assert one.endswith(tuple("0123456789"))
    assert one != two
    page.key("Escape")
    assert page.run("document.getElementById('reading').textContent") == ""


def test_play_runs_and_pauses(page: Any) -> None:
    set_slider(page, 2)
    page.run("document.getElementById('play').click()")
    page.wait("Number(document.getElementById('time').value) > 4")
    page.run("document.getElementById('play').click()")
    assert page.run("document.getElementById('play').textContent") == "Play"
    held = page.run("document.getElementById('time').value")
    page.run("new Promise((done) => setTimeout(done, 500))")
    assert page.run("document.getElementById('time').value") == held


def test_energy_inversion_can_be_chosen(page: Any) -> None:
    set_slider(page, 20)
    before = page.run(PIXELS)
    page.run("document.querySelector('input[name=field][value=energy]').click()")
    assert page.run(PIXELS) != before


def test_light_and_dark(page: Any) -> None:
    def background() -> str:
        return page.run("getComputedStyle(document.body).backgroundColor")

    light, pixels = background(), page.run(PIXELS)
    page.call("Emulation.setEmulatedMedia", features=[{"name": "prefers-color-scheme", "value": "dark"}])
    page.wait("document.documentElement.dataset.theme === 'dark'")
    assert background() != light
    assert page.run(PIXELS) != pixels
    page.call("Emulation.setEmulatedMedia", features=[])
    page.wait("document.documentElement.dataset.theme === 'light'")


def test_print_hides_the_controls_and_opens_the_tables(page: Any) -> None:
    page.call("Emulation.setEmulatedMedia", media="print")
    page.run("dispatchEvent(new Event('beforeprint'))")
    assert page.run("getComputedStyle(document.getElementById('play')).display") == "none"
    assert page.run("[...document.querySelectorAll('details')].every((d) => d.open)")
    page.run("dispatchEvent(new Event('afterprint'))")
    page.call("Emulation.setEmulatedMedia", media="")
    assert not page.run("[...document.querySelectorAll('details')].some((d) => d.open)")


def test_every_control_has_a_name(page: Any) -> None:
    tree = page.call("Accessibility.getFullAXTree")["nodes"]
    controls = [
        n
        for n in tree
        if n.get("role", {}).get("value") in ("button", "slider", "radio", "img", "link") and not n.get("ignored")
    ]
    assert len(controls) >= 10
    for node in controls:
        assert node["name"]["value"].strip(), node["role"]


def test_a_narrow_window_keeps_all_in_sight(page: Any) -> None:
    page.call("Emulation.setDeviceMetricsOverride", width=380, height=800, deviceScaleFactor=2, mobile=False)
    page.run("new Promise((done) => setTimeout(done, 300))")
    assert page.run("document.documentElement.scrollWidth") <= 380
    page.call("Emulation.clearDeviceMetricsOverride")


def test_markup_in_names_runs_nothing(browser: Any, build: Callable[..., Result], tmp_path: Path) -> None:
    evil = '<img src=x onerror="window.hurt=1"></script><script>window.hurt=2</script>'
    result = build(sites=2, cells=11, names=[evil, "ZX.B"])
    result.summary["event"]["name"] = evil
    path = write_report(result, tmp_path / "evil.html")
    browser.errors.clear()
    browser.requests.clear()
    browser.open(path)
    browser.run("document.querySelector('#site-buttons button').click()")
    assert browser.run("window.hurt") is None
    assert evil in browser.run("document.getElementById('site-title').textContent")
    assert browser.run("document.querySelectorAll('img').length") == 0
    assert browser.errors == []


@pytest.mark.parametrize("case", ["directions only", "fault trace", "date line"])
def test_other_results_open_quietly(
    browser: Any, build: Callable[..., Result], unilateral: Result, tmp_path: Path, case: str
) -> None:
    results = {
        "directions only": lambda: Result(
            {**unilateral.summary, "rupture": None}, unilateral.sites, unilateral.direction
        ),
        "fault trace": lambda: build(trace=True, second_km=30.0),
        "date line": lambda: build(longitude_deg=179.9, latitude_deg=-17.0, energy=False),
    }
    path = write_report(results[case](), tmp_path / "report.html")
    browser.errors.clear()
    browser.open(path)
    browser.run("document.querySelector('#site-buttons button').click()")
    assert not browser.run("document.getElementById('site-section').hidden")
    assert browser.run("document.getElementById('no-map').hidden") == (case != "directions only")
    assert browser.errors == []


def test_a_single_field_offers_no_choice(browser: Any, build: Callable[..., Result], tmp_path: Path) -> None:
    browser.errors.clear()
    browser.open(write_report(build(energy=False, sites=2, cells=15), tmp_path / "report.html"))
    assert browser.run("document.getElementById('field-choice').getBoundingClientRect().height") == 0
    assert browser.errors == []
