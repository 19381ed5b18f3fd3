"""What the real cases say can be measured, against what was published."""

from __future__ import annotations

import jsonschema
import numpy as np
import pytest

from real_cases import vetted_in_full
from topovet.report.json_document import load_schema

pytestmark = pytest.mark.real_data


@pytest.mark.parametrize("case", ["Bi2Se3"])
def test_bi2se3_has_the_cone_of_the_literature(case: str) -> None:
    """One Dirac point at the zone centre, 3 to 6e5 m/s, left-handed above it, the same on both
    faces.

    Sources: Zhang et al., Nat. Phys. 5, 438 (2009), doi:10.1038/nphys1270 (5e5 m/s from density
    functionals); Xia et al., Nat. Phys. 5, 398 (2009), doi:10.1038/nphys1274 (about 5e5 m/s,
    photoemission); left-handed: Hsieh et al., Nature 460, 1101 (2009), doi:10.1038/nature08234.
    All from memory: the range holds what is quoted between the Dirac point and the Fermi energy.
    """
    numbers = vetted_in_full(case).measurable
    jsonschema.Draft202012Validator(
        load_schema()["properties"]["measurable"] | {"$defs": load_schema()["$defs"]}
    ).validate(numbers)
    assert [p["k_surface"] for p in numbers["kramers_pairs"]] == [[0.0, 0.0]] * 2
    point, band = numbers["dirac_point"], numbers["surface_band"]
    assert point["same_on_both_terminations"]
    # between the projected bands, 0.34 eV apart at the centre
    assert 0.02 < point["exposure_at_its_k_meV"] / 1e3 < 0.17
    # near the top of the valence band, as calculations with this functional find it
    assert abs(point["above_valence_edge_meV"]) < 60
    assert point["below_conduction_edge_meV"] > 200
    assert 3e5 < band["velocity_min_m_s"] < band["velocity_max_m_s"] < 6e5
    assert band["spin_above_dirac_point"] == "clockwise"
    # 128 eV angstrom^3 fitted to photoemission by Kuroda et al., PRL 105, 076802 (2010), with a
    # velocity 1.7 times this one (from memory)
    assert 64 < band["warping_range_eV_ang3"][0] <= band["warping_eV_ang3"] < 192
    assert band["warping_misfit_meV"] < 2
    in_gap = [o for o in numbers["oscillation"] if not o["bulk_carriers_too"]]
    assert len(in_gap) >= 4
    for row in in_gap:
        assert 3e5 < row["velocity_m_s"] < 6.5e5
        assert 0.005 < row["k_F_per_ang"] < 0.1
        # nearly round in the gap
        assert row["k_F_max_per_ang"] < 1.05 * row["k_F_min_per_ang"]


@pytest.mark.parametrize("case", ["Bi2Se3"])
def test_bi2se3_films_lose_their_gap_within_some_quintuple_layers(case: str) -> None:
    """Zhang et al., Nat. Phys. 6, 584 (2010), doi:10.1038/nphys1689: a gap below six quintuple
    layers of 9.5 angstrom (from memory)."""
    films = vetted_in_full(case).measurable["films"]
    thickness, gap = np.array(films["thickness_nm"]), np.array(films["gap_meV"])
    assert np.diff(thickness) == pytest.approx(0.955, abs=0.005)
    assert gap[1] > 50
    assert 5 <= np.searchsorted(-gap, -1.0) + 1 <= 8


@pytest.mark.parametrize("case", ["Bi111_bilayer"])
def test_a_bismuth_bilayer_conducts_at_its_edges(case: str) -> None:
    """2 e^2/h, helical; Murakami, PRL 97, 236805 (2006), doi:10.1103/PhysRevLett.97.236805.

    The antimony bilayer, a trivial one, is promised nothing.
    """
    edge = vetted_in_full(case).measurable["edge"]
    assert (edge["kind"], edge["conductance_e2_h"]) == ("helical", 2)
    assert edge["gap_over_kT_300_K"] > 10
    by_edge = [c["termination"] for c in edge["crossings"]]
    assert sorted(by_edge) == sorted(set(by_edge))
    for crossing in edge["crossings"]:
        assert 1e5 < abs(crossing["velocity_m_s"]) < 1e6
        # about two cells of 4.4 angstrom
        assert 4 < crossing["decay_length_ang"] < 20
    assert list(vetted_in_full("Sb111_bilayer").measurable) == ["note"]


@pytest.mark.endurance
@pytest.mark.parametrize("case", ["BiTeI_pressed"])
def test_the_two_faces_of_a_polar_crystal_differ(case: str) -> None:
    """BiTeI under pressure ends in Te or in I: their levels have no reason to agree."""
    numbers = vetted_in_full(case).measurable
    assert not numbers["dirac_point"]["same_on_both_terminations"]
    assert "note" in numbers["films"]
