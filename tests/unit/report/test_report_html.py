"""The HTML report: whole, offline, escaped, small, the same each time."""

from __future__ import annotations

import re
from collections import Counter
from collections.abc import Callable
from dataclasses import replace
from functools import cache
from html.parser import HTMLParser
from itertools import pairwise

import pytest

import invented_dossiers as invented
from topovet.report.figures import build_figures, palette
from topovet.report.html import (
    evidence_name,
    evidence_value,
    formula_markup,
    prose_markup,
    render_report,
)
from topovet.report.material import ReportMaterial
from topovet.report.svg import UnsafeSvgError, inline_svg
from topovet.verdict.advice import CODES
from topovet.verdict.flags import Flag

CASES = [invented.strong, invented.sheet, invented.undetermined, invented.hostile]
VOID = {"meta", "br", "hr", "img", "link", "input"}


class Page(HTMLParser):
    """Elements, text and nesting of a page."""

    def __init__(self, html: str) -> None:
        super().__init__(convert_charrefs=True)
        self.elements: list[tuple[str, dict[str, str | None]]] = []
        self.text: list[str] = []
        self.open: list[str] = []
        self.feed(html)
        self.close()

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.elements.append((tag, dict(attrs)))
        if tag not in VOID:
            self.open.append(tag)
        if tag in {"td", "th", "dt", "dd", "li", "p", "br", "text"}:
            self.text.append(" ")

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.elements.append((tag, dict(attrs)))

    def handle_endtag(self, tag: str) -> None:
        assert self.open, f"</{tag}> closes nothing"
        assert self.open.pop() == tag, f"</{tag}> closes another element"

    def handle_data(self, data: str) -> None:
        if not self.open or self.open[-1] != "style":
            self.text.append(data)

    def all(self, *tags: str) -> list[dict[str, str | None]]:
        return [attributes for tag, attributes in self.elements if tag in tags]


@cache
def _html(build: Callable[[], ReportMaterial]) -> str:
    material = build()
    return render_report(material, build_figures(material))


@cache
def _page(build: Callable[[], ReportMaterial]) -> Page:
    return Page(_html(build))


def _words(build: Callable[[], ReportMaterial]) -> str:
    return " ".join("".join(_page(build).text).split())


@pytest.mark.parametrize("build", CASES)
def test_page_is_well_formed(build: Callable[[], ReportMaterial]) -> None:
    page = _page(build)
    assert page.open == []
    for once in ("html", "head", "body", "main", "header", "footer", "h1", "nav"):
        assert len(page.all(once)) == 1, once


@pytest.mark.parametrize("build", CASES)
def test_ids_are_unique_and_references_meet_them(build: Callable[[], ReportMaterial]) -> None:
    page = _page(build)
    ids = Counter(a["id"] for _, a in page.elements if "id" in a)
    assert max(ids.values()) == 1
    for _, attributes in page.elements:
        for wanted in (attributes.get("aria-labelledby") or "").split():
            assert wanted in ids
        if (attributes.get("href") or "").startswith("#"):
            assert (attributes["href"] or "")[1:] in ids
    assert set(re.findall(r"url\(#([^)]+)\)", _html(build))) <= set(ids)


@pytest.mark.parametrize("build", CASES)
def test_page_needs_nothing_from_outside(build: Callable[[], ReportMaterial]) -> None:
    page = _page(build)
    for tag, attributes in page.elements:
        assert tag not in {"script", "link", "iframe", "object", "embed", "img", "base", "form"}
        for key, value in attributes.items():
            assert not key.startswith("on"), (tag, key)
            if key in {"href", "src", "xlink:href", "action", "data"}:
                assert (value or "").startswith("#"), (tag, value)
    assert not re.search(r"url\(\s*[\"']?(?!#)|@import", _html(build))
    assert "default-src 'none'" in _html(build)


@pytest.mark.parametrize("build", CASES)
def test_page_is_small(build: Callable[[], ReportMaterial]) -> None:
    assert len(_html(build).encode()) < 400_000


def test_page_is_deterministic() -> None:
    again = invented.strong()
    assert render_report(again, build_figures(again)) == _html(invented.strong)


def test_hostile_strings_stay_text() -> None:
    html = _html(invented.hostile)
    assert "<script" not in html
    assert "\x1b" not in html
    assert "\u202e" not in html
    assert "{{ 7*7 }}" in html
    assert ">49<" not in html
    shown = "<script>alert('1')</script>\" ../../etc & $x^2$ \\x1b[31m\\x202e{{ 7*7 }}"
    assert _words(invented.hostile).count(shown) > 15


@pytest.mark.parametrize("build", CASES)
def test_headings_descend_by_one(build: Callable[[], ReportMaterial]) -> None:
    levels = [int(tag[1]) for tag, _ in _page(build).elements if re.fullmatch("h[1-6]", tag)]
    assert levels[0] == 1
    assert levels.count(1) == 1
    assert all(b - a <= 1 for a, b in pairwise(levels))


@pytest.mark.parametrize("build", CASES)
def test_tables_have_headers_and_figures_have_words(build: Callable[[], ReportMaterial]) -> None:
    page = _page(build)
    assert all("scope" in a for a in page.all("th"))
    assert len(page.all("figcaption")) == len(page.all("figure"))
    for attributes in page.all("svg"):
        assert attributes["role"] == "img"
        assert attributes["aria-labelledby"]


def test_sections_of_a_whole_report() -> None:
    sections = [a["id"] for a in _page(invented.strong).all("section")]
    assert sections == [
        *("grounds", "numbers", "gap", "flags", "structure", "parity", "witnesses", "bands"),
        *("audit", "tasks", "provenance", "handling"),
    ]
    links = [a["href"] for a in _page(invented.strong).all("a")]
    assert {f"#{s}" for s in sections} <= set(links)
    assert len(_page(invented.strong).all("figure")) == 5


def test_the_verdict_is_said_in_one_sentence() -> None:
    assert (
        "Lantern-7 (CdTe2), P-3m1, is judged to be a strong topological insulator, Z₂ = 1;(000) "
        "on one witness, with a direct gap of at most 0.700 eV (sampled, not proved)."
    ) in _words(invented.strong)


def test_what_is_untested_is_said() -> None:
    words = _words(invented.strong)
    assert "Wilson loops: not tested by this version." in words
    assert "Surface and edge states: not tested by this version." in words
    assert "a closing there would void every index" in words


def test_an_undetermined_case_says_why_and_shows_no_index() -> None:
    words = _words(invented.undetermined)
    assert "Gravel-11 (CdTe2) stays undetermined: Filled states at (1/2, 0, 0)" in words
    assert "1;(000)" not in words
    assert "without signs, since there are no parities to show" in words
    assert "Bands along a path were not computed in this run." in words


def test_numbers_carry_units() -> None:
    words = _words(invented.strong)
    for phrase in (
        *("0.700 eV", "350 meV", "0.620 meV", "Lattice vectors, Å", "gap (eV)"),
        *("residual (meV)", "distance along the path (1/Å)", "E − E(VBM) (eV)"),
        *(
            "distance between the functions (Å)",
            "largest |H(R)| (meV)",
            "largest offset (Å) 1.9",
            "1.2 s",
        ),
    ):
        assert phrase in words, phrase


def test_flags_come_worst_first_with_evidence_and_advice() -> None:
    flags = (
        Flag("filling-off", "info", "Least."),
        Flag("gap-closes", "error", "Worst.", {"gap_meV": 0.25}, "Look again."),
    )
    base = invented.strong()
    material = replace(base, verdict=replace(base.verdict, flags=flags))
    words = " ".join("".join(Page(render_report(material, {})).text).split())
    assert words.index("Worst.") < words.index("Least.")
    assert "What to do. Look again." in words
    assert "gap (meV) 0.25" in words
    assert "1 error, 0 warnings, 1 note" in words
    assert "1 error-level flag speaks against it" in words


@pytest.mark.parametrize("code", CODES)
def test_every_flag_renders_with_its_page(code: str) -> None:
    base = invented.strong()
    flags = (Flag(code, "warning", "Something was found."),)
    material = replace(base, verdict=replace(base.verdict, flags=flags))
    html = render_report(material, {})
    assert Page(html).open == []
    for heading in ("What it means", "How it is tested", "What to do"):
        assert f"<h4>{heading}</h4>" in html


def test_handling_names_the_elements() -> None:
    words = _words(invented.strong)
    assert "Cd and its compounds" in words
    assert "Te and its compounds" in words
    assert "follow local rules" in words


def test_missing_results_leave_a_whole_page() -> None:
    base = invented.strong()
    bare = replace(base, bands=None, gap=None, parity=None, interpolation=None, tasks=())
    assert Page(render_report(bare, build_figures(bare))).open == []


def test_formula_markup_escapes() -> None:
    assert str(formula_markup("Cd2<b>")) == "Cd<sub>2</sub>&lt;b&gt;"
    assert str(formula_markup("A&1'")) == "A&amp;<sub>1</sub>&#39;"


def test_prose_markup() -> None:
    text = "One `x<y` para\nwith a break.\n\n- first\n  more\n- second"
    assert str(prose_markup(text)) == (
        "<p>One <code>x&lt;y</code> para with a break.</p>"
        "<ul><li>first more</li><li>second</li></ul>"
    )


@pytest.mark.parametrize(
    ("key", "shown"),
    [
        ("gap_eV", "gap (eV)"),
        ("largest_offset_ang", "largest offset (Å)"),
        ("n_k", "n k"),
        ("eV", "eV"),
    ],
)
def test_evidence_names(key: str, shown: str) -> None:
    assert evidence_name(key) == shown


@pytest.mark.parametrize(
    ("value", "shown"),
    [
        (None, "not known"),
        (True, "yes"),
        (-3, "−3"),
        (0.41, "0.41"),
        ([0.5, 0.0], "0.5, 0"),
        (2e-5, "2.000e−5"),
        ("as is", "as is"),
        ([], "none"),
        (1500.0, "1500"),
    ],
)
def test_evidence_values(value: object, shown: str) -> None:
    assert evidence_value(value) == shown


@pytest.mark.parametrize(
    "inside",
    [
        "<script>1</script>",
        "<g onload='1'/>",
        "<image href='#a'/>",
        "<use href='http://a.b/c'/>",
        "<use href='javascript:1'/>",
        "<path style='fill: url(http://a.b)'/>",
        "<path style='@import x'/>",
        "<foreignObject/>",
        "<style>p { color: red }</style>",
        "<a href='#x'>t</a>",
        "<g",
        "<!-- c -->",
        "<?php ?>",
        "<![CDATA[<script>]]>",
    ],
)
def test_svg_that_is_more_than_drawing_is_refused(inside: str) -> None:
    with pytest.raises(UnsafeSvgError, match="'zone'"):
        inline_svg("zone", f"<svg xmlns='http://www.w3.org/2000/svg'>{inside}</svg>")


def test_a_doctype_with_entities_is_refused() -> None:
    bomb = '<!DOCTYPE svg [<!ENTITY a "b">]><svg>&a;</svg>'
    with pytest.raises(UnsafeSvgError):
        inline_svg("zone", bomb)


def _luminance(colour: str) -> float:
    parts = [int(colour[i : i + 2], 16) / 255 for i in (1, 3, 5)]
    linear = [p / 12.92 if p <= 0.04045 else ((p + 0.055) / 1.055) ** 2.4 for p in parts]
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]


@pytest.mark.parametrize("colour", palette.TEXT_COLOURS)
@pytest.mark.parametrize("ground", [palette.WHITE, palette.PAPER])
def test_text_colours_have_contrast(colour: str, ground: str) -> None:
    """Web Content Accessibility Guidelines 2.2, success criterion 1.4.3: at least 4.5:1."""
    ratio = (_luminance(ground) + 0.05) / (_luminance(colour) + 0.05)
    assert ratio >= 4.5
