"""The page in a real browser: no error, no overflow, working filters, hostile names as text.

Chromium and its driver are found on the path or named by PASSPLAN_BROWSER and PASSPLAN_DRIVER; without them
the tests are skipped. ``.ci/run`` installs Debian's.
"""

from __future__ import annotations

import os
import shutil
from collections.abc import Callable, Iterator
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
from plan_variants import HOSTILE, multiplied, renamed

from passplan.inputs.run import Run
from passplan.planning.record import PlanRecord
from passplan.report.page import write_page
from passplan.report.tracks import window_tracks

webdriver = pytest.importorskip("selenium.webdriver", reason="selenium is not installed; pip install passplan[test]")
Keys = pytest.importorskip("selenium.webdriver.common.keys").Keys
BROWSER = os.environ.get("PASSPLAN_BROWSER") or shutil.which("chromium") or shutil.which("chromium-browser")
DRIVER = os.environ.get("PASSPLAN_DRIVER") or shutil.which("chromedriver")
pytestmark = pytest.mark.skipif(
    not (BROWSER and DRIVER), reason="no browser: install chromium and chromium-driver to test the page in one"
)
FLAGS = (
    "--headless",
    "--no-sandbox",
    "--disable-gpu",
    "--disable-quic",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
    "--window-size=1280,900",
)


@pytest.fixture(scope="module")
def browser(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Any]:
    options = webdriver.ChromeOptions()
    options.binary_location = BROWSER
    for flag in (*FLAGS, f"--user-data-dir={tmp_path_factory.mktemp('profile')}"):
        options.add_argument(flag)
    options.set_capability("goog:loggingPrefs", {"browser": "ALL"})
    driver = webdriver.Chrome(options=options, service=webdriver.ChromeService(DRIVER))
    yield driver
    driver.quit()


@pytest.fixture(scope="module")
def places(
    short_plan: PlanRecord,
    short_run: Run,
    replanned: PlanRecord,
    outage_run: Run,
    tmp_path_factory: pytest.TempPathFactory,
) -> dict[str, Path]:
    """The sample's page, one against an earlier plan, one with hostile names, and one with 300 contacts."""
    folder = tmp_path_factory.mktemp("pages")
    hostile, hostile_run = renamed(short_plan, short_run, HOSTILE)
    name = "</title><script>window.hurt=3</script>\u202e"
    hostile = replace(hostile, summary={**hostile.summary, "name": name, "warnings": [name]})
    found = {}
    for key, (record, run) in {
        "plain": (short_plan, short_run),
        "against": (replanned, outage_run),
        "hostile": (hostile, hostile_run),
        "many": multiplied(short_plan, short_run, 3),
    }.items():
        found[key] = folder / f"{key}.html"
        write_page(record, run, found[key])
    several = replace(short_plan, summary={**short_plan.summary, "horizon_end_utc": "2027-03-11T20:00:00.000Z"})
    found["days"] = folder / "days.html"
    write_page(several, short_run, found["days"])
    tracks = [
        replace(track, keyholes=((float(track.time_s[0]), float(track.time_s[-1])),))
        for track in window_tracks(short_run, short_plan.windows)
    ]
    found["keyholes"] = folder / "keyholes.html"
    write_page(short_plan, short_run, found["keyholes"], tracks)
    return found


@pytest.fixture
def opened(browser: Any, places: dict[str, Path]) -> Callable[..., Any]:
    def open_page(key: str, width: int = 1280, **media: str) -> Any:
        browser.execute_cdp_cmd(
            "Emulation.setDeviceMetricsOverride",
            {"width": width, "height": 900, "deviceScaleFactor": 1, "mobile": width < 500},
        )
        features = [{"name": k.replace("_", "-"), "value": v} for k, v in media.items()]
        browser.execute_cdp_cmd("Emulation.setEmulatedMedia", {"features": features})
        browser.get("about:blank")
        browser.get_log("browser")
        browser.get(places[key].as_uri())
        return browser

    return open_page


def _select(page: Any, field: str, label: str) -> None:
    page.execute_script(
        "const f = document.getElementById(arguments[0]);"
        "f.value = [...f.options].find((o) => o.textContent === arguments[1]).value;"
        "f.dispatchEvent(new Event('change'));",
        field,
        label,
    )


def _shown_rows(page: Any) -> list[list[str]]:
    rows: list[list[str]] = page.execute_script(
        "return [...document.querySelectorAll('#rows tr:not([hidden])')]"
        ".map((r) => [r.children[3].textContent, r.children[4].textContent]);"
    )
    return rows


@pytest.mark.parametrize("key", ["plain", "against", "hostile", "many"])
@pytest.mark.parametrize("width", [1280, 390])
def test_no_console_error_and_no_sideways_scrolling(opened: Callable[..., Any], key: str, width: int) -> None:
    page = opened(key, width)
    assert page.get_log("browser") == []
    assert page.execute_script("return document.documentElement.scrollWidth") <= width
    page.execute_script("document.getElementById('unused').open = true")
    assert page.execute_script("return document.documentElement.scrollWidth") <= width


def test_hostile_names_hurt_nobody(opened: Callable[..., Any]) -> None:
    page = opened("hostile")
    assert page.execute_script("return window.hurt") is None
    assert page.execute_script("return document.images.length") == 0
    text = page.execute_script("return document.body.textContent")
    for name in ("<script>window.hurt=1</script>", "{{ 7*7 }} & </script>", "צופה-1"):
        assert name in text
    names = {row[1] for row in _shown_rows(page)}
    assert HOSTILE["Ambril-1"] in names
    _select(page, "f-s", HOSTILE["Ambril-1"])
    page.execute_script("document.querySelector('#rows tr:not([hidden]) a').click()")
    assert HOSTILE["Ambril-1"] in page.execute_script("return document.getElementById('contact-title').textContent")
    assert page.execute_script("return window.hurt") is None
    assert page.get_log("browser") == []


def test_filters_narrow_everything(opened: Callable[..., Any], short_plan: PlanRecord) -> None:
    page = opened("plain")
    contacts = short_plan.contacts
    assert len(_shown_rows(page)) == len(contacts)
    _select(page, "f-s", "Ambril-3")
    expected = contacts[contacts["spacecraft"] == "Ambril-3"]
    assert [row[0] for row in _shown_rows(page)] == list(expected["antenna"])
    assert page.execute_script("return document.getElementById('count').textContent") == f"{len(expected)} contacts"
    visible = (
        "return [...document.querySelectorAll('.mark')]"
        ".filter((m) => m.checkVisibility({visibilityProperty: true})).length"
    )
    assert page.execute_script(visible) == 2 * len(expected)
    _select(page, "f-a", "Isvarde-A")
    both = expected[expected["antenna"] == "Isvarde-A"]
    assert len(_shown_rows(page)) == len(both)
    _select(page, "f-s", "all")
    _select(page, "f-a", "all")
    _select(page, "f-g", "Port Ellery")
    assert {row[0] for row in _shown_rows(page)} == {"Ellery-A", "Ellery-B"}
    lanes = (
        "return [...document.querySelectorAll('.lane[data-a]:not([hidden]) strong')].map((n) => n.textContent.trim())"
    )
    assert page.execute_script(lanes) == ["Ellery-A", "Ellery-B"]
    page.execute_script("document.getElementById('unused').open = true; ")
    _select(page, "f-g", "all")
    shown = page.execute_script("return document.querySelectorAll('#unused-rows tr').length")
    assert shown == min(len(short_plan.unused), 200)
    for _ in range((len(short_plan.unused) - 1) // 200):
        page.execute_script("document.getElementById('more').click()")
    assert page.execute_script("return document.querySelectorAll('#unused-rows tr').length") == len(short_plan.unused)


def test_a_day_of_several_is_chosen(opened: Callable[..., Any], short_plan: PlanRecord) -> None:
    page = opened("days", 390)
    assert page.get_log("browser") == []
    assert page.execute_script("return document.documentElement.scrollWidth") <= 390
    bands = "return [...document.querySelectorAll('[data-band]:not([hidden])')].map((b) => b.dataset.band)"
    assert page.execute_script(bands) == ["0", "1", "2"] * 2
    _select(page, "f-d", "Wed 10 Mar 08:00")
    assert page.execute_script(bands) == ["1", "1"]
    assert _shown_rows(page) == []
    _select(page, "f-d", "Tue 09 Mar 08:00")
    assert len(_shown_rows(page)) == len(short_plan.contacts)
    _select(page, "zone", "local time of Port Ellery")
    second = "return document.querySelectorAll('[data-band] .zone-ruler i')[0].textContent"
    assert page.execute_script(second) == "21:00"
    assert page.get_log("browser") == []


def test_filters_reach_the_list_of_dropped_contacts(opened: Callable[..., Any], replanned: PlanRecord) -> None:
    page = opened("against")
    gone = "return [...document.querySelectorAll('tr.gone:not([hidden])')].length"
    dropped = replanned.summary["against"]["dropped"]
    assert page.execute_script(gone) == len(dropped)
    _select(page, "f-s", dropped[0]["spacecraft"])
    assert page.execute_script(gone) == sum(row["spacecraft"] == dropped[0]["spacecraft"] for row in dropped)


def test_a_contact_is_drawn_when_it_is_chosen(opened: Callable[..., Any], short_plan: PlanRecord) -> None:
    page = opened("plain")
    for number in (0, len(short_plan.contacts) - 1):
        page.execute_script(f"document.querySelector('.mark[data-c=\"{number}\"]').click()")
        row = short_plan.contacts.iloc[number]
        title = page.execute_script("return document.getElementById('contact-title').textContent")
        assert row["spacecraft"] in title
        assert row["antenna"] in title
        drawn = page.execute_script(
            "return ['.panorama .skyline', '.panorama .path-contact', '.chart']"
            ".map((q) => document.querySelectorAll(q).length)"
        )
        assert drawn[:2] == [1, 1]
        assert drawn[2] >= 1
        broken = page.execute_script(
            "return [...document.querySelectorAll('#charts [d]')]"
            ".filter((n) => /NaN|undefined|Infinity/.test(n.getAttribute('d'))).length"
        )
        assert broken == 0
    assert page.get_log("browser") == []


def test_the_keyboard_reaches_contacts_and_values(opened: Callable[..., Any]) -> None:
    page = opened("plain")
    first = page.execute_script("return document.querySelector('.lane-body .mark')")
    page.execute_script("arguments[0].focus()", first)
    page.switch_to.active_element.send_keys(Keys.ARROW_RIGHT)
    focused = page.execute_script("return document.activeElement.dataset.c")
    assert focused != first.get_attribute("data-c")
    page.switch_to.active_element.send_keys(Keys.ENTER)
    assert page.execute_script("return location.hash") == f"#c{focused}"
    page.execute_script("document.getElementById('charts').focus()")
    page.switch_to.active_element.send_keys(Keys.ARROW_RIGHT)
    readout = "return document.getElementById('readout').textContent"
    assert "azimuth" in page.execute_script(readout)
    page.execute_script("dispatchEvent(new Event('resize'))")
    assert "azimuth" in page.execute_script(readout)
    page.execute_script("document.getElementById('after').click()")
    assert "azimuth" not in page.execute_script(readout)


def test_local_time_is_an_extra_column_and_never_replaces_utc(opened: Callable[..., Any]) -> None:
    page = opened("plain")
    _select(page, "zone", "local time of Port Ellery")
    head = page.execute_script(
        "return [...document.querySelectorAll('#contacts th')].slice(0, 2).map((h) => h.textContent)"
    )
    assert head == ["Start, UTC", "Start, local time of Port Ellery"]
    row = page.execute_script("return [...document.querySelectorAll('#rows tr')][0].children[1].textContent")
    hour = int(page.execute_script("return document.querySelector('#rows a').textContent").split()[-1][:2])
    assert int(row.split()[-1][:2]) == (hour + 13) % 24
    assert page.execute_script("return document.querySelectorAll('.zone-ruler i').length") > 4
    _select(page, "zone", "UTC only")
    assert page.execute_script("return document.querySelector('#contacts th:nth-child(2)').hidden") is True


def test_light_and_dark(opened: Callable[..., Any]) -> None:
    colour = "return getComputedStyle(document.documentElement).backgroundColor"
    light = opened("plain", prefers_color_scheme="light").execute_script(colour)
    dark = opened("plain", prefers_color_scheme="dark").execute_script(colour)
    assert light == "rgb(251, 250, 246)"
    assert dark == "rgb(16, 23, 27)"


def test_keyholes_are_drawn_where_they_are_known(opened: Callable[..., Any]) -> None:
    for key, count in (("plain", 0), ("keyholes", 1)):
        page = opened(key)
        page.execute_script("document.querySelector('.mark').click()")
        assert page.execute_script("return document.querySelectorAll('.path-keyhole').length") == count


def test_it_prints_with_the_draft_mark(opened: Callable[..., Any]) -> None:
    page = opened("plain")
    page.execute_cdp_cmd("Emulation.setEmulatedMedia", {"media": "print"})
    shown = page.execute_script(
        "return ['.stamp', '.tools', '.cautions', '#contacts'].map((q) => document.querySelector(q).checkVisibility())"
    )
    page.execute_cdp_cmd("Emulation.setEmulatedMedia", {"media": ""})
    assert shown == [True, False, True, True]
