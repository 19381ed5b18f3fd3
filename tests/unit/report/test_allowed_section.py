"""What indicator values allow, as the report says it."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import invented_dossiers as invented
from topovet.report.allowed_words import allowed_rows, combination_table, values_text
from topovet.report.html import render_report


def _values(status: str, allowed: list[Any] | None, modulus: int | None = None) -> dict[str, Any]:
    return {"status": status, "allowed": allowed, "modulus": modulus}


def _entry(invariant: str, operation: str, values: dict[str, Any], **more: Any) -> dict[str, Any]:
    entry = {"invariant": invariant, "operation": operation, "planes": [], "source": "kappa <b>"}
    return {**entry, **values, "found": None, "with_mirror_numbers": values, **more}


def _set(number: int, delta: int) -> list[dict[str, Any]]:
    """One combination: a mirror Chern number modulo 4 and delta of the rotation."""
    return [
        _values("fixed", [0]),
        _values("fixed", [[0, 0, 0]]),
        _values("modulo", [number], 4),
        _values("fixed", [delta]),
    ]


PLANES = ["m(1 -1 0) k=0", "m(1 0 -1) k=0"]
ENTRY: dict[str, Any] = {
    "status": "ok",
    "reason": "",
    "group": "Fm-3m (225)",
    "indicators": {"z4": 0},
    "invariants": [
        _entry("strong index", "", _values("fixed", [0]), found=0),
        _entry("weak indices", "", _values("fixed", [[0, 0, 0]]), found=[0, 0, 0]),
        _entry(
            "mirror Chern number",
            "m(1 -1 0)",
            _values("modulo", [0], 2),
            planes=PLANES,
            found=-2,
            with_mirror_numbers=_values("fixed", [-2]),
        ),
        _entry("rotation invariant", "4 [0 0 1]", _values("open", [0, 1])),
    ],
    "combinations": [_set(0, 0), _set(2, 1)],
    "fits_mirror_numbers": [False, True],
    "outside": [],
}


def _page(entry: dict[str, Any]) -> str:
    material = invented.strong()
    witnesses = material.verdict.witnesses
    levels = replace(witnesses.band_representations, allowed=entry)
    verdict = replace(material.verdict, witnesses=replace(witnesses, band_representations=levels))
    return render_report(replace(material, verdict=verdict), {})


def test_rows_in_plain_words() -> None:
    strong, weak, mirror, rotation = allowed_rows(ENTRY)
    assert (strong.allowed, strong.found, strong.protected_by) == ("0", "0", "time reversal")
    assert (weak.allowed, weak.protected_by) == ("(000)", "lattice translations")
    assert mirror.invariant == "mirror Chern number n_M, plane k = 0"
    assert mirror.protected_by == "mirror m(1 −1 0) and 1 like it"
    assert (mirror.allowed, mirror.found, mirror.with_numbers) == ("0 mod 2", "−2", "−2")
    assert rotation.allowed == "left open (0 or 1)"
    assert "Dirac cones" in rotation.meaning
    strong_entry, *others = ENTRY["invariants"]
    beside = {**ENTRY, "invariants": [{**strong_entry, "allowed": [1]}, *others]}
    assert "two strong phases" in allowed_rows(beside)[3].meaning
    assert values_text(_values("modulo", [1, 3], 8)) == "1 or 3 mod 8"
    assert values_text(_values("open", None), say_open=True) == "left open (any integer)"


def test_sets_show_what_differs_alone() -> None:
    table = combination_table(ENTRY)
    assert table is not None
    assert table.heads == ("n_M of m(1 −1 0), k = 0", "δ of 4 [0 0 1]")
    assert table.rows == ((("0 mod 4", "0"), False), (("2 mod 4", "1"), True))
    assert combination_table({**ENTRY, "combinations": []}) is None


def test_section() -> None:
    page = _page(ENTRY)
    start = page.index('<section id="allowed"')
    section = page[start : page.index("</section>", start)]
    for text in (
        "Fm−3m (225)",
        "can differ between phases",
        "n<sub>M</sub>",
        "κ &lt;b&gt;",
        "2 mod 4",
    ):
        assert text in section
    assert "Not allowed" not in section
    assert "Not allowed" in _page({**ENTRY, "outside": PLANES})
    assert "No list: nothing &lt;fits" in _page({"status": "failed", "reason": "nothing <fits"})
    assert 'id="allowed"' not in _page({"status": "not-applicable", "reason": "no"})
