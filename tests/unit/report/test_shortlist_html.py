"""The page of the shortlist as text: offline, escaped, true to the list, the same each time."""

from __future__ import annotations

import base64
import hashlib
import json
import re
from html.parser import HTMLParser
from typing import Any

import pytest

import invented_shortlists as invented
from invented_shortlists import DISPUTED, FAILURES, HOSTILE_NAMES, SOUND
from topovet.report.figures import palette
from topovet.report.shortlist.colours import DARK
from topovet.report.shortlist.html import counted, open_groups, page_data, render_shortlist

LISTED = invented.shortlist([*invented.campaign(40), DISPUTED, SOUND], FAILURES)
VOID = {"meta", "br", "input"}


class Page(HTMLParser):
    """Elements, text outside scripts and styles, and the contents of those."""

    def __init__(self, html: str) -> None:
        super().__init__(convert_charrefs=True)
        self.elements: list[tuple[str, dict[str, str | None]]] = []
        self.open: list[str] = []
        self.text: list[str] = []
        self.raw: list[str] = []
        self.feed(html)
        self.close()

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.elements.append((tag, dict(attrs)))
        if tag not in VOID:
            self.open.append(tag)
        if tag in ("script", "style"):
            self.raw.append("")

    def handle_endtag(self, tag: str) -> None:
        assert self.open.pop() == tag, f"</{tag}> closes another element"

    def handle_data(self, data: str) -> None:
        if self.open and self.open[-1] in ("script", "style"):
            self.raw[-1] += data
        else:
            self.text.append(data)


def _page(shortlist: Any) -> Page:
    return Page(render_shortlist(shortlist))


def _words(page: Page) -> str:
    return " ".join(" ".join(page.text).split())


def test_same_list_same_bytes() -> None:
    assert render_shortlist(LISTED) == render_shortlist(LISTED)


@pytest.mark.parametrize("shortlist", [LISTED, invented.hostile(), invented.shortlist([], [])])
def test_structure(shortlist: Any) -> None:
    page = _page(shortlist)
    assert page.open == []
    tags = [tag for tag, _ in page.elements]
    assert tags.count("script") == 2
    assert tags.count("style") == 1
    assert not {"img", "link", "iframe", "object", "embed", "base", "svg", "image"} & set(tags)
    ids = [a["id"] for _, a in page.elements if "id" in a]
    assert len(ids) == len(set(ids))
    for _, attributes in page.elements:
        assert not any(name.startswith("on") or name == "style" for name in attributes)
        assert not {"src", "action", "srcset", "data"} & set(attributes)


def test_the_policy_admits_this_style_and_this_script_alone() -> None:
    page = _page(LISTED)
    policy = next(a["content"] for t, a in page.elements if t == "meta" and "http-equiv" in a)
    assert policy is not None
    style, _, script = page.raw

    def digest(text: str) -> str:
        return base64.b64encode(hashlib.sha256(text.encode()).digest()).decode()

    assert policy == (
        f"default-src 'none'; style-src 'sha256-{digest(style)}'; "
        f"script-src 'sha256-{digest(script)}'; base-uri 'none'; form-action 'none'"
    )
    assert not re.search(r"url\(|@import|https?:", style)
    assert not re.search(
        r"innerHTML|outerHTML|insertAdjacent|document\.write|eval\(|fetch\(", script
    )
    assert re.findall(r"https?:[^\"]*", script) == ["http://www.w3.org/2000/svg"]


def test_hostile_text_stays_text() -> None:
    html = render_shortlist(invented.hostile())
    page = Page(html)
    data = json.loads(page.raw[1])
    names = {row["name"] for row in data["rows"]}
    assert "</script><script>window.owned=1</script>" in names
    assert not re.search(r"[<>&]", page.raw[1])
    assert html.count("<script") == 2
    words = _words(page)
    for name in HOSTILE_NAMES:
        shown = " ".join(name.replace("\u202e", "\\x202e").split())
        assert shown in words
    assert "49" not in words.replace("7*7", "")  # no template is run
    assert "\u202e" not in html


def test_no_link_leaves_the_folder() -> None:
    for shortlist in (LISTED, invented.hostile()):
        page = _page(shortlist)
        links = [a["href"] or "" for t, a in page.elements if t == "a"]
        links += [row["link"] for row in json.loads(page.raw[1])["rows"]]
        assert len(links) > 4
        for link in links:
            assert re.fullmatch(r"#[a-z]+|\./[\w.%-]+(/[\w.%-]+)*/report\.html", link), link


def test_data_of_the_page_are_those_of_the_list() -> None:
    data = page_data(LISTED, "./")
    assert [row["rank"] for row in data["rows"]] == [row.rank for row in LISTED.rows]
    for shown, row in zip(data["rows"], LISTED.rows, strict=True):
        gap = row.candidate.gaps.indirect_ev
        assert shown["indirect"] == (None if gap is None else pytest.approx(1000 * gap))
        assert shown["merit"] == row.merit
        if row.tier == "undetermined":
            assert (shown["class"], shown["indices"], shown["merit"]) == ("undetermined", "", None)


def test_numbers_of_the_head() -> None:
    words = _words(_page(LISTED))
    assert "Shortlist of 42 cases" in words
    assert counted(LISTED) in words
    assert "2 could not be vetted" in words
    assert counted(invented.shortlist([SOUND])) == "1 nontrivial"
    assert counted(invented.shortlist([])) == "no case passes the filters"


def test_disagreements_are_laid_open_with_their_causes() -> None:
    words = _words(_page(invented.shortlist([DISPUTED, SOUND])))
    assert "Witnesses disagree 1" in words
    for cause in DISPUTED.causes:
        assert cause.finding in words
    assert "Confirmed" in words
    assert "Ruled out" in words
    assert DISPUTED.asked_because in words
    assert "trivial, Z₂ = 0;(000), gap 212 meV" in words
    assert "Follows from fermi-outside-gap." in words
    assert "Wilson loops Z₂ = 0;(000)" in words
    assert DISPUTED.flags[0].summary in words


def test_every_open_case_is_in_exactly_one_group() -> None:
    rows = LISTED.rows
    grouped = [row.rank for _, _, group in open_groups(rows) for row in group]
    undetermined = {row.rank for row in rows if row.tier == "undetermined"}
    assert len(grouped) == len(set(grouped))
    assert undetermined <= set(grouped)
    headings = [heading for heading, _, _ in open_groups(rows)]
    assert headings[0] == "Witnesses disagree"


def test_failures_are_listed() -> None:
    words = _words(_page(LISTED))
    for failure in FAILURES:
        assert failure.message in words
        assert failure.name in words
    assert "Every case has a verdict" in _words(_page(invented.shortlist([SOUND])))


def test_rules_are_explained_with_their_numbers() -> None:
    words = _words(_page(LISTED))
    for part, sentence in LISTED.rules.explained:
        assert f"{part} " in words
        assert sentence in words
    assert "strong-ti 1" in words


def _luminance(colour: str) -> float:
    channels = [int(colour[i : i + 2], 16) / 255 for i in (1, 3, 5)]
    linear = [c / 12.92 if c <= 0.04045 else ((c + 0.055) / 1.055) ** 2.4 for c in channels]
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]


def test_the_dark_palette_names_every_colour() -> None:
    light = {n.lower().replace("_", "-") for n in vars(palette) if n.isupper()}
    assert set(DARK) == light - {"text-colours"}


@pytest.mark.parametrize("ground", ["white", "paper", "face-tint", "filled-tint"])
@pytest.mark.parametrize(
    "text", ["ink", "muted", "filled", "empty", "odd", "warning", "error", "info", "good"]
)
def test_text_has_contrast_in_the_dark(text: str, ground: str) -> None:
    """Web Content Accessibility Guidelines 2.2, success criterion 1.4.3: at least 4.5:1."""
    high, low = _luminance(DARK[text]) + 0.05, _luminance(DARK[ground]) + 0.05
    assert high / low >= 4.5
