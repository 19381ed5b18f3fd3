"""The shortlist in a real Chromium: sort, filter, keys, links, thousands of rows, no request.

Times are those of one click including layout and paint; the promise is one second for 5,000 rows.
"""

from __future__ import annotations

import json
import re
import statistics
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
from PIL import Image

import invented_dossiers
import invented_shortlists as invented
from chromium_pipe import CHROMIUM, Browser, browser
from invented_shortlists import DISPUTED, FAILURES, SOUND
from topovet.report.figures import build_figures
from topovet.report.html import render_report
from topovet.report.shortlist.html import render_shortlist
from topovet.report.shortlist.records import Shortlist

pytestmark = [
    pytest.mark.browser,
    pytest.mark.skipif(CHROMIUM is None, reason="no chromium on this machine"),
]

MIDDLE = invented.shortlist([*invented.campaign(300), DISPUTED, SOUND], FAILURES)
MANY = invented.shortlist([*invented.campaign(5000), DISPUTED], FAILURES)

TIMED = """(act => new Promise(done => {
  const start = performance.now();
  act();
  document.body.offsetHeight;
  requestAnimationFrame(() => setTimeout(() => done(performance.now() - start)));
}))"""


@pytest.fixture(scope="module")
def chromium(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Browser]:
    with browser(tmp_path_factory.mktemp("profile")) as one:
        yield one


@pytest.fixture
def tab(chromium: Browser) -> Iterator[Browser]:
    """The browser with a clean record; afterwards nothing may have gone wrong or out."""
    chromium.complaints.clear()
    chromium.requested.clear()
    chromium.resize(1280, 900)
    yield chromium
    assert chromium.complaints == []
    assert all(url.startswith("file:") for url in chromium.requested), chromium.requested


def _open(tab: Browser, shortlist: Shortlist, folder: Path) -> None:
    path = folder / "shortlist.html"
    path.write_text(render_shortlist(shortlist), encoding="utf-8")
    tab.open(path.as_uri())
    assert tab.requested == [path.as_uri()]


def _column(tab: Browser, number: int) -> list[str]:
    cells = tab.evaluate(
        f"[...document.querySelectorAll('#rows tr.row')].map(r => r.children[{number}].textContent)"
    )
    assert isinstance(cells, list)
    return cells


def _ranks(tab: Browser) -> list[int]:
    return [int(text.replace(",", "")) for text in _column(tab, 0)]


def _status(tab: Browser) -> str:
    return str(tab.evaluate("document.getElementById('status').textContent"))


def _expected(key: Any, *, down: bool) -> list[int]:
    """Ranks in the order of a key, cases without a value last, ties by rank."""
    known = [r for r in MIDDLE.rows if key(r) is not None]
    known.sort(key=lambda r: (-key(r) if down else key(r), r.rank))
    return [r.rank for r in [*known, *(r for r in MIDDLE.rows if key(r) is None)]][:100]


def test_it_opens_in_the_order_of_the_ranks(tab: Browser, tmp_path: Path) -> None:
    _open(tab, MIDDLE, tmp_path)
    assert _ranks(tab) == list(range(1, 101))
    assert _status(tab) == "302 cases, rows 1 to 100"
    visible = "[...document.querySelectorAll('.view')].filter(v => !v.hidden).map(v => v.id)"
    assert tab.evaluate(visible) == ["ranking"]


@pytest.mark.parametrize(
    ("heading", "key", "first"),
    [
        ("indirect", lambda r: r.candidate.gaps.indirect_ev, "descending"),
        ("radius", lambda r: r.candidate.radius_mev, "descending"),
        ("merit", lambda r: r.merit, "descending"),
        ("rank", lambda r: r.rank, "descending"),  # it stands ascending already
        ("group", lambda r: r.candidate.space_group[0], "ascending"),
    ],
)
def test_headings_sort_both_ways(
    tab: Browser, tmp_path: Path, heading: str, key: Any, first: str
) -> None:
    _open(tab, MIDDLE, tmp_path)
    head = f"th[data-key={heading}]"
    second = {"descending": "ascending", "ascending": "descending"}[first]
    for way in (first, second):
        tab.click(f"{head} button")
        assert tab.evaluate(f"document.querySelector('{head}').ariaSort") == way
        assert tab.evaluate("document.querySelectorAll('[aria-sort]').length") == 1
        assert _ranks(tab) == _expected(key, down=way == "descending")


def test_names_sort_as_people_read_them(tab: Browser, tmp_path: Path) -> None:
    names = ("HX-10", "hx-9", "Alpha")
    listed = invented.shortlist([replace(SOUND, name=n, folder=n, link=n) for n in names])
    _open(tab, listed, tmp_path)
    tab.click("th[data-key=name] button")
    assert _column(tab, 1) == ["Alpha", "hx-9", "HX-10"]


def _choose(tab: Browser, field: str, value: str) -> None:
    tab.evaluate(
        f"(e => {{ e.value = {json.dumps(value)};"
        " e.dispatchEvent(new Event('input', {bubbles: true})); })"
        f"(document.getElementById('{field}'))"
    )


def test_filters_keep_what_they_say(tab: Browser, tmp_path: Path) -> None:
    _open(tab, MIDDLE, tmp_path)
    candidates = [row.candidate for row in MIDDLE.rows]

    def left() -> int:
        return int(_status(tab).split()[0])

    tab.type("#f-with", "bi te")
    assert left() == sum({"Bi", "Te"} <= set(c.elements or ()) for c in candidates) > 0
    tab.click("#clear")
    tab.type("#f-without", "Pb, Tl")
    assert left() == sum(not {"Pb", "Tl"} & set(c.elements or ()) for c in candidates)
    tab.click("#clear")
    tab.type("#f-gap", "100")
    known = [c.gaps.indirect_ev for c in candidates if c.gaps.indirect_ev is not None]
    assert left() == sum(gap >= 0.1 for gap in known)
    tab.click("#clear")
    _choose(tab, "f-grade", "B")
    assert left() == sum(c.grade in "AB" for c in candidates)
    _choose(tab, "f-class", "Strong topological insulator")
    assert left() == sum(c.grade in "AB" and c.class_ == "strong-ti" for c in candidates)
    tab.click("#clear")
    _choose(tab, "f-agreement", "disagree")
    assert left() == sum(c.agreement == "disagree" for c in candidates)
    tab.click("#clear")
    _choose(tab, "f-flag", "-")
    assert left() == sum(all(f.severity == "info" for f in c.flags) for c in candidates)
    tab.click("#clear")
    tab.type("#f-text", "lantern")
    assert _column(tab, 1) == ["Lantern-1"]
    shown = (
        "[...document.querySelectorAll('.point')].filter(p => !p.hasAttribute('display')).length"
    )
    assert tab.evaluate(shown) == 1
    tab.type("#f-text", "no such case")
    assert tab.evaluate("document.getElementById('nothing').hidden") is False
    tab.click("#clear")
    assert left() == len(candidates)


def test_pages_of_the_table(tab: Browser, tmp_path: Path) -> None:
    _open(tab, MIDDLE, tmp_path)
    tab.click("#next")
    assert _ranks(tab) == list(range(101, 201))
    tab.evaluate("(e => { e.value = '250'; e.dispatchEvent(new Event('change')); })"
                 "(document.getElementById('page-rows'))")  # fmt: skip
    assert _ranks(tab) == list(range(1, 251))
    tab.click("#next")
    assert _ranks(tab) == list(range(251, 303))
    assert tab.evaluate("document.getElementById('next').disabled") is True


def test_keys_move_open_and_lead_to_the_dossier(tab: Browser, tmp_path: Path) -> None:
    listed = invented.shortlist([SOUND, DISPUTED])
    invented.write_dossier(tmp_path / "gravel-2")
    _open(tab, listed, tmp_path)
    tab.evaluate("document.querySelector('th[data-key=flags] button').focus()")
    tab.press("Tab")
    here = "document.activeElement.querySelector('th')?.textContent"
    assert tab.evaluate(here) == "Lantern-1"
    outline = "getComputedStyle(document.activeElement).boxShadow"
    assert tab.evaluate(outline) != "none"
    tab.press("ArrowDown")
    assert tab.evaluate(here) == "Gravel-2"
    tab.press("ArrowUp")
    tab.press("End")
    assert tab.evaluate(here) == "Gravel-2"
    tab.press(" ")
    detail = "document.querySelector('tr.detail').textContent"
    assert DISPUTED.obstacle in tab.evaluate(detail)
    tab.press(" ")
    assert tab.evaluate("document.querySelector('tr.detail')") is None
    tab.press("Enter", follow=True)
    assert tab.evaluate("document.title") == "dossier gravel-2"


def test_a_heading_is_worked_by_keys(tab: Browser, tmp_path: Path) -> None:
    _open(tab, MIDDLE, tmp_path)
    tab.evaluate("document.querySelector('th[data-key=radius] button').focus()")
    tab.press("Enter")
    assert _ranks(tab) == _expected(lambda r: r.candidate.radius_mev, down=True)


@pytest.mark.parametrize("selector", ["#rows tr.row th a", "#chart a.point"])
def test_a_click_leads_to_the_dossier(tab: Browser, tmp_path: Path, selector: str) -> None:
    invented.write_dossier(tmp_path / "lantern-1")
    _open(tab, invented.shortlist([SOUND]), tmp_path)
    tab.click(selector, follow=True)
    assert tab.evaluate("document.title") == "dossier lantern-1"


def test_views_follow_the_address(tab: Browser, tmp_path: Path) -> None:
    _open(tab, MIDDLE, tmp_path)
    visible = "[...document.querySelectorAll('.view')].filter(v => !v.hidden).map(v => v.id)"
    for name in ("open", "failures", "rules", "ranking"):
        tab.click(f".tabs a[href='#{name}']")
        tab.evaluate("new Promise(done => setTimeout(done, 50))")
        assert tab.evaluate(visible) == [name]
        assert tab.evaluate("document.querySelector('[aria-current]').hash") == f"#{name}"


def test_points_stand_where_their_numbers_say(tab: Browser, tmp_path: Path) -> None:
    """Order along each axis follows the numbers, and names cover no other name."""
    _open(tab, MIDDLE, tmp_path)
    found = tab.evaluate(
        "[...document.querySelectorAll('.point')].map(p => [p.ariaLabel.split(',')[0],"
        " ...p.getAttribute('transform').match(/-?[\\d.]+/g).map(Number)])"
    )
    drawn = {name: (x, y) for name, x, y in found}
    rows = [
        r.candidate for r in MIDDLE.rows if r.candidate.radius_mev and r.candidate.radius_mev > 0.1
    ]
    assert len(rows) > 200
    by_radius = sorted(rows, key=lambda c: c.radius_mev or 0)
    xs = [drawn[c.name][0] for c in by_radius]
    assert xs == sorted(xs)
    by_gap = sorted(rows, key=lambda c: c.gaps.indirect_ev or 0)
    ys = [drawn[c.name][1] for c in by_gap]
    assert ys == sorted(ys, reverse=True)
    boxes = tab.evaluate(
        "[...document.querySelectorAll('#chart .name')].map(t => (b => [b.x, b.y, b.x + b.width,"
        " b.y + b.height])(t.getBoundingClientRect()))"
    )
    assert len(boxes) >= 3
    for i, (a, b, c, d) in enumerate(boxes):
        for e, f, g, h in boxes[:i]:
            assert not (a < g - 2 and c > e + 2 and b < h - 4 and d > f + 4)


def test_five_thousand_rows_within_a_second(tab: Browser, tmp_path: Path) -> None:
    _open(tab, MANY, tmp_path)
    acts = [f"document.querySelector('th[data-key={k}] button').click()"
            for k in ("name", "indirect", "merit", "title", "rank")]  # fmt: skip
    for field, value in (("f-text", "hx-0"), ("f-with", "Bi"), ("f-gap", "50")):
        acts.append(
            f"(e => {{ e.value = '{value}';"
            " e.dispatchEvent(new Event('input', {bubbles: true})); })"
            f"(document.getElementById('{field}'))"
        )
    acts.append("document.getElementById('clear').click()")
    times = [tab.evaluate(f"{TIMED}(() => {act})") for act in acts]
    assert _status(tab).startswith("5,001 cases")
    assert statistics.median(times) < 1000.0, times


def test_hostile_names_do_nothing(tab: Browser, tmp_path: Path) -> None:
    _open(tab, invented.hostile(), tmp_path)
    for name in ("open", "failures", "rules", "ranking"):
        tab.evaluate(f"location.hash = '{name}'")
    tab.evaluate("document.querySelectorAll('.toggle').forEach(b => b.click())")
    assert tab.evaluate("window.owned") is None
    assert tab.evaluate("document.querySelectorAll('img, iframe, #rows script').length") == 0
    assert "</script><script>window.owned=1</script>" in _column(tab, 1)
    assert "two\\x0alines" in _column(tab, 1) or "two\nlines" in _column(tab, 1)


@pytest.mark.parametrize("width", [1440, 390])
@pytest.mark.parametrize("shortlist", [MIDDLE, invented.hostile()], ids=["campaign", "hostile"])
def test_nothing_sticks_out(tab: Browser, tmp_path: Path, width: int, shortlist: Shortlist) -> None:
    tab.resize(width, 900)
    _open(tab, shortlist, tmp_path)
    for name in ("open", "failures", "rules", "ranking"):
        tab.evaluate(f"location.hash = '{name}'; new Promise(r => setTimeout(r, 50))")
        wide = tab.evaluate("[document.documentElement.scrollWidth, innerWidth]")
        assert wide[0] <= wide[1], name


def test_light_and_dark_are_drawn(tab: Browser, tmp_path: Path) -> None:
    shares = []
    for dark in (False, True):
        tab.resize(1280, 900, dark=dark)
        _open(tab, MIDDLE, tmp_path)
        tab.requested.clear()
        with Image.open(tab.picture(tmp_path / f"{dark}.png")) as image:
            grey = image.convert("L").resize((128, 90)).tobytes()
        shares.append(sum(value < 80 for value in grey) / len(grey))
    assert shares[0] < 0.1
    assert shares[1] > 0.8


def test_it_prints_every_row(tab: Browser, tmp_path: Path) -> None:
    _open(tab, MIDDLE, tmp_path)
    paper = tab.paper()
    assert 8 <= len(re.findall(rb"/Type\s*/Page\b", paper)) <= 60
    assert _ranks(tab) == list(range(1, 101))
    tab.evaluate("window.dispatchEvent(new Event('beforeprint')), 1")
    assert len(_ranks(tab)) == 302


def test_without_script_the_lists_are_there(tab: Browser, tmp_path: Path) -> None:
    tab.send("Emulation.setScriptExecutionDisabled", value=True)
    try:
        _open(tab, MIDDLE, tmp_path)
        text = tab.send("DOM.getOuterHTML", nodeId=tab.send("DOM.getDocument")["root"]["nodeId"])
        assert "switched off here" in text["outerHTML"]
        assert DISPUTED.causes[0].finding in text["outerHTML"]
    finally:
        tab.send("Emulation.setScriptExecutionDisabled", value=False)


@pytest.mark.parametrize(
    "build", [invented_dossiers.strong, invented_dossiers.undetermined, invented_dossiers.hostile]
)
def test_the_report_asks_for_nothing_and_complains_of_nothing(
    tab: Browser, tmp_path: Path, build: Any
) -> None:
    material = build()
    path = tmp_path / "report.html"
    path.write_text(render_report(material, build_figures(material)), encoding="utf-8")
    tab.open(path.as_uri())
    tab.evaluate("document.querySelectorAll('details').forEach(d => { d.open = true; })")
    assert tab.evaluate("document.querySelectorAll('section').length") > 5
    assert tab.requested == [path.as_uri()]


def test_the_browser_notices_complaints_and_requests(chromium: Browser, tmp_path: Path) -> None:
    """The checks above can fail."""
    page = tmp_path / "bad.html"
    page.write_text(
        "<!DOCTYPE html><script>console.error('no');fetch('http://127.0.0.1:9/x').catch(() => 0);"
        "setTimeout(() => { throw new Error('late') })</script>"
    )
    chromium.complaints.clear()
    chromium.requested.clear()
    chromium.open(page.as_uri())
    chromium.evaluate("new Promise(r => setTimeout(r, 300))")
    assert any("late" in text for text in chromium.complaints)
    assert any("'no'" in text for text in chromium.complaints)
    assert "http://127.0.0.1:9/x" in chromium.requested
