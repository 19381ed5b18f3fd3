"""What the verdict says can be measured: where it speaks, where it keeps silent, its schema."""

from __future__ import annotations

from dataclasses import replace
from types import MappingProxyType

import jsonschema
import numpy as np
import pytest

from invented_findings import changed
from invented_surfaces import states, witness
from topovet.boundary.results import ThicknessSeries
from topovet.report.json_document import load_schema
from topovet.verdict.conclude import Conclusion
from topovet.verdict.document import InvariantsEntry
from topovet.verdict.measurable import measurable


def _entry(class_: str, **parts):
    conclusion = Conclusion(InvariantsEntry(z2=(1, 0, 0, 0)), "agree", class_, ())
    given = {"surface": witness((1, None, 0, None)), "surface_states": states(), **parts}
    return measurable(changed(**given), conclusion)


def _check(entry) -> None:
    schema = load_schema()
    part = {**schema["properties"]["measurable"], "$defs": schema["$defs"]}
    jsonschema.Draft202012Validator(part).validate(entry)


def _gap(vbm: float, cbm: float):
    found = changed().gap
    return replace(found, vbm_ev=vbm, cbm_ev=cbm, indirect_ev=cbm - vbm)


def test_an_open_verdict_says_nothing() -> None:
    """Even where states were followed: an error flag leaves the class undetermined."""
    assert _entry("undetermined") == {}
    assert _entry("strong-ti", gap=None) == {}


@pytest.mark.parametrize("class_", ["trivial", "crystalline-ti", "weyl-semimetal"])
def test_other_classes_get_a_note_and_no_number(class_: str) -> None:
    entry = _entry(class_)
    assert list(entry) == ["note"]
    _check(entry)


def test_a_surface_that_was_not_followed_is_said_to_be_so() -> None:
    missing = MappingProxyType({"surface-states": "made up"})
    entry = _entry("strong-ti", surface_states=None, missing=missing)
    assert entry == {"note": "Not computed: made up."}


def test_every_block_names_its_assumptions_and_follows_the_schema() -> None:
    entry = _entry("strong-ti", gap=_gap(5.0, 5.6))
    _check(entry)
    assert entry["estimate"] is True
    for name in ("uncertainty", "dirac_point", "surface_band", "landau_intercept", "films"):
        assert entry[name]["assumptions"], name
    assert entry["surface_channel"]["assumptions"]
    assert entry["doping"]["assumptions"]


def test_exposure_counts_from_the_nearest_edge_anywhere() -> None:
    """The invented Dirac point lies at 5.2 eV."""
    for vbm, cbm, exposure, status in (
        (5.0, 5.6, 200.0, "exposed"),
        (5.0, 5.25, 50.0, "exposed"),
        (5.23, 5.6, -30.0, "buried"),
    ):
        point = _entry("strong-ti", gap=_gap(vbm, cbm))["dirac_point"]
        assert point["exposure_meV"] == pytest.approx(exposure)
        assert point["status"] == status


def test_errors_larger_than_the_exposure_leave_it_open() -> None:
    audit = replace(changed().audit, rounding_mev=80.0)
    point = _entry("strong-ti", gap=_gap(5.15, 5.6), audit=audit)["dirac_point"]
    assert not point["beyond_known_errors"]
    assert _entry("strong-ti", gap=_gap(5.0, 5.6))["dirac_point"]["beyond_known_errors"]


def test_a_crossing_that_no_window_holds_is_buried() -> None:
    none = replace(states(), pairs=(), cones=(), buried=((0.0, 0.0), (0.5, 0.0)), films=None)
    entry = _entry("strong-ti", surface_states=none)
    _check(entry)
    assert entry["dirac_point"]["exposure_meV"] == 0.0
    assert "surface_band" not in entry


def test_a_semimetal_never_leaves_the_current_to_its_surface() -> None:
    entry = _entry("strong-ti", gap=_gap(5.6, 5.0))
    _check(entry)
    assert entry["surface_channel"]["films"] == []
    assert "overlap" in entry["surface_channel"]["reason"]
    assert entry["doping"]["aim_from_eV"] is None


def test_numbers_of_a_cone_of_three_ev_angstrom() -> None:
    """k_F = E / v, F = hbar k_F^2 / 2e, levels as the formula: the invented band is straight."""
    entry = _entry("strong-ti", gap=_gap(5.0, 5.6))
    assert entry["surface_band"]["velocity_m_s"] == pytest.approx(4.558e5, rel=1e-3)
    for row in entry["oscillation"]:
        k_f = abs(row["above_dirac_point_meV"]) / 3000
        assert row["k_F_per_ang"] == pytest.approx(k_f)
        assert row["frequency_T"] == pytest.approx(
            1.0545718e-34 * k_f**2 * 1e20 / (2 * 1.602177e-19)
        )
    known = [row for row in entry["landau_levels"] if row["band_meV"] is not None]
    assert {row["n"] for row in known} >= {-1, 0, 1, 2}
    for row in known:
        assert row["band_meV"] == pytest.approx(row["straight_cone_meV"], rel=1e-3)
        assert not row["straight_cone_fails"]


def test_thicker_films_need_to_be_colder() -> None:
    films = _entry("strong-ti", gap=_gap(5.1, 5.3))["surface_channel"]["films"]
    known = [f["temperature_K"] for f in films if f["temperature_K"] is not None]
    assert known == sorted(known, reverse=True)
    assert len(known) >= 2
    for film in films:
        if None not in film.values():
            assert film["temperature_low_K"] < film["temperature_K"] < film["temperature_high_K"]


@pytest.mark.parametrize(
    ("fermi", "needs", "distance"),
    [(5.3, "none", 0.0), (5.7, "acceptors", 100), (4.9, "donors", 100)],
)
def test_which_side_to_dope(fermi: float, needs: str, distance: float) -> None:
    electrons = replace(changed().electrons, fermi_ev=fermi)
    doping = _entry("strong-ti", gap=_gap(5.0, 5.6), electrons=electrons)["doping"]
    assert (doping["needs"], doping["distance_meV"]) == (needs, pytest.approx(distance))


def test_films_that_do_not_thin_out_steadily() -> None:
    series = ThicknessSeries((10.0, 20.0, 30.0, 40.0), (0.2, 5e-3, 8e-3, 5e-4), (0.0, 0.0))
    films = _entry("strong-ti", surface_states=replace(states(), films=series))["films"]
    assert films["monotonic"] is False
    assert films["thickness_for_1_meV_nm"] == pytest.approx(4.0)
    thin = ThicknessSeries((10.0, 20.0), (0.2, 5e-3), (0.0, 0.0))
    films = _entry("strong-ti", surface_states=replace(states(), films=thin))["films"]
    assert films["thickness_for_1_meV_nm"] is None


def test_nothing_infinite_reaches_the_document() -> None:
    """A slope from too few points has no spread."""
    cone = replace(states().cones[0], velocity_spread_ev_ang=float("nan"))
    entry = _entry("strong-ti", surface_states=replace(states(), cones=(cone,)))
    assert entry["surface_band"]["velocity_of_fit_m_s"] is None
    _check(entry)
    assert np.isfinite(entry["dirac_point"]["exposure_meV"])


def test_a_surface_that_stands_in_for_the_likeliest_is_said_to() -> None:
    stand_in = replace(witness((1, None, 0, None)), instead_of=(1, 1, -1), instead_reason="x")
    entry = _entry("strong-ti", surface=stand_in, gap=_gap(5.0, 5.6))
    _check(entry)
    assert any("(1 1 -1)" in line for line in entry["dirac_point"]["assumptions"])
