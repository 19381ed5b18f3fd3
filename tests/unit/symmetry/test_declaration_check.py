"""Wrong declarations of sound Hamiltonians, and the evidence that names them."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from inverted_models import with_noise
from lattice_models import LatticeModel, Terms, bonds, build_basis
from model_changes import with_home_cells
from topovet.arrays import IntArray
from topovet.model.assemble import LatticeHamiltonian
from topovet.model.basis import OrbitalBasis
from topovet.model.crystal import Crystal
from topovet.model.fourier import build_bloch_sum
from topovet.symmetry.declaration_check import compare_declaration
from topovet.symmetry.declaration_results import DeclarationCheck
from topovet.symmetry.sites import SiteAssignment, declared_sites, settle_homes

CENTRE = np.zeros(3)


def _two_species() -> LatticeModel:
    """s, pz, px, py on each of two unlike atoms in the CsCl structure: an orbital-rich test bed.

    Random strengths with the Slater-Koster directions: inversion holds, little else does.
    """
    rng = np.random.default_rng(11)
    cell = np.diag([4.0, 4.2, 4.5])
    positions = np.array([[0.0, 0, 0], [0.5, 0.5, 0.5]])
    terms = Terms(16)
    spin = np.eye(2)
    for i in range(2):
        block = slice(8 * i, 8 * i + 8)
        terms.add_onsite(block, np.kron(np.diag(rng.normal(size=4)), spin))
    for i, j in ((0, 1), (0, 0), (1, 1)):
        rows, columns = slice(8 * i, 8 * i + 8), slice(8 * j, 8 * j + 8)
        ss, sp, ps, pp, pi = rng.uniform(0.3, 1.0, 5)
        for r_cell, vector in bonds(cell, positions, i, j):
            d = (vector / np.linalg.norm(vector))[[2, 0, 1]]
            hop = np.zeros((4, 4))
            hop[0, 0] = ss
            hop[0, 1:] = sp * d
            hop[1:, 0] = -(ps if i != j else sp) * d
            hop[1:, 1:] = (pp + pi) * np.outer(d, d) - pi * np.eye(3)
            half = 0.5 if i == j else 1.0
            terms.add(r_cell, rows, columns, half * np.kron(hop, spin))
    r_cells, h_r = terms.arrays()
    orbitals = [
        (site, positions[i], name)
        for i, site in enumerate(("Ga1", "As1"))
        for name in ("s", "pz", "px", "py")
    ]
    crystal = Crystal(cell, ("Ga", "As"), positions)
    return LatticeModel(
        "two_species", crystal, build_basis(orbitals), r_cells, h_r, 8, True, (0.0, 0.0, 0.0)
    )


MODEL = _two_species()
SITES = declared_sites(MODEL.basis.positions_frac, MODEL.crystal)
"""Where the functions are in truth; the declarations below claim otherwise."""


def check(basis: OrbitalBasis, *, noise_ev: float = 0.0) -> DeclarationCheck:
    built = with_noise(MODEL.tight_binding(), noise_ev, np.random.default_rng(0))
    return compare_declaration(
        LatticeHamiltonian(built, build_bloch_sum(built)),
        MODEL.crystal,
        basis,
        SITES,
        CENTRE,
        np.array([CENTRE]),
        spinful=True,
    )


def declared_in(order: list[int] | IntArray) -> OrbitalBasis:
    return MODEL.basis.reordered(np.array(order))


def test_right_declaration_has_nothing_to_mend() -> None:
    found = check(MODEL.basis)
    assert found.declared.worst_mev == pytest.approx(0, abs=1e-9)
    assert found.inferred_fit.worst_mev == pytest.approx(0, abs=1e-9)
    assert found.disagreeing == ()
    assert found.corrections == ()
    assert found.shift_frac is None
    assert [f.overlap for f in found.functions] == pytest.approx([1.0] * 16)


def test_swapped_lines_are_told_by_the_centres() -> None:
    found = check(declared_in(np.roll(np.arange(16), 8)))
    assert found.declared.worst_mev > 100
    assert found.inferred_fit.worst_mev == pytest.approx(0, abs=1e-9)
    assert found.disagreeing == tuple(range(16))
    assert not any(f.on_declared_site for f in found.functions)
    best = found.corrections[0]
    assert best.reading.kind == "site-order"
    assert best.reading.order == tuple(np.roll(np.arange(16), 8))
    assert best.fit.worst_mev == pytest.approx(0, abs=1e-9)


def test_swapped_lines_look_sound_at_the_trim_of_one_set_alone() -> None:
    """Both lines alike: at every TRIM the phases of the two sites agree up to a common sign.

    Only generic k (and the centres) tell, which is why residuals are given for both.
    """
    found = check(declared_in(np.roll(np.arange(16), 8)))
    assert found.declared.trim_mev == pytest.approx(0, abs=1e-9)
    assert found.declared.generic_mev is not None
    assert found.declared.generic_mev > 100


def test_s_and_p_of_each_atom_interchanged() -> None:
    order = [2, 3, 4, 5, 6, 7, 0, 1, 10, 11, 12, 13, 14, 15, 8, 9]
    found = check(declared_in(order))
    best = found.corrections[0]
    assert best.reading.kind == "line-order"
    assert best.fit.worst_mev == pytest.approx(0, abs=1e-9)
    assert best.reading.order is not None
    mended = declared_in(order).reordered(np.array(best.reading.order))
    assert mended.labels == MODEL.basis.labels


def test_orbitals_of_one_atom_shuffled() -> None:
    order = [4, 5, 2, 3, 0, 1, 6, 7, *range(8, 16)]  # px, pz, s, py
    found = check(declared_in(order))
    assert set(found.disagreeing) in ({0, 1, 4, 5}, set(range(16)) - {0, 1, 4, 5})
    mending = [c for c in found.corrections if c.reading.order is not None]
    assert mending
    assert mending[0].fit.worst_mev == pytest.approx(0, abs=1e-9)
    assert mending[0].reading.order is not None
    mended = declared_in(order).reordered(np.array(mending[0].reading.order))
    assert [label.split()[1][0] for label in mended.labels] == [
        label.split()[1][0] for label in MODEL.basis.labels
    ]


def test_spin_in_blocks() -> None:
    in_block = np.arange(16).reshape(-1, 2).T.reshape(-1)
    found = check(declared_in(in_block))
    best = found.corrections[0]
    assert best.reading.kind == "spin-order"
    assert best.reading.order is not None
    assert declared_in(in_block).reordered(np.array(best.reading.order)).labels == (
        MODEL.basis.labels
    )
    assert best.fit.worst_mev == pytest.approx(0, abs=1e-9)


def test_p_declared_where_s_is() -> None:
    """Another l: no order of what is declared can mend it, only another parity can."""
    harmonics, shells = MODEL.basis.harmonics.copy(), MODEL.basis.shells.copy()
    harmonics[:2] = harmonics[2:4]
    shells[:2] = 2
    found = check(replace(MODEL.basis, harmonics=harmonics, shells=shells))
    assert found.disagreeing == (0, 1)
    assert [f.overlap for f in found.functions[:4]] == pytest.approx([-1, -1, 1, 1])
    best = found.corrections[0]
    assert (best.reading.kind, best.reading.order, best.reading.flipped) == ("parity", None, (0, 1))
    assert best.fit.worst_mev == pytest.approx(0, abs=1e-9)


def test_centre_that_is_none_is_answered_with_one_that_is() -> None:
    built = MODEL.tight_binding()
    found = compare_declaration(
        LatticeHamiltonian(built, build_bloch_sum(built)),
        MODEL.crystal,
        MODEL.basis,
        SITES,
        np.array([0.25, 0.25, 0.25]),
        np.array([CENTRE]),
        spinful=True,
    )
    assert found.declared.trim_mev is not None or "moves the site" in found.declared.reason
    assert found.inferred.reliability == "refused"
    kinds = {c.reading.kind: c for c in found.corrections}
    assert kinds["centre"].centre_frac == (0.0, 0.0, 0.0)
    assert kinds["centre"].fit.worst_mev == pytest.approx(0, abs=1e-9)
    good = [t for t in found.centres if t.inferred.reliability == "good"]
    assert [t.shift_ang for t in good] == pytest.approx([0.0])


def test_declared_positions_from_another_origin() -> None:
    positions = MODEL.basis.positions_frac + np.array([0.1, 0, 0.05])
    moved = replace(MODEL.basis, positions_frac=positions)
    found = check(moved)
    assert found.shift_frac is not None
    np.testing.assert_allclose(found.shift_frac, [-0.1, 0, -0.05], atol=1e-9)
    # the operator of the shifted declaration does not exist about the old centre, but about its own
    assert "moves the site" in found.declared.reason
    kinds = {c.reading.kind: c for c in found.corrections}
    np.testing.assert_allclose(kinds["centre"].centre_frac, [0.1, 0, 0.05], atol=1e-9)


def test_functions_in_another_cell_than_declared() -> None:
    """s of the first atom taken from the cell at a1: no order mends it, its own cell does."""
    moves = np.zeros((16, 3), dtype=np.int64)
    moves[:2, 0] = 1
    moved = with_home_cells(MODEL, moves)
    built = moved.tight_binding()

    def compare(sites: SiteAssignment) -> DeclarationCheck:
        return compare_declaration(
            LatticeHamiltonian(built, build_bloch_sum(built)),
            MODEL.crystal,
            MODEL.basis,
            sites,
            CENTRE,
            np.array([CENTRE]),
            spinful=True,
        )

    as_declared = compare(SITES)
    assert as_declared.declared.worst_mev > 100
    assert as_declared.rehomed == ()
    assert as_declared.inferred_fit.worst_mev > 100
    settled = settle_homes(SITES, MODEL.crystal, built, doubt_cells=0.5)
    found = compare(settled)
    assert found.rehomed == (0, 1)
    assert found.inferred.reliability == "good"
    assert found.inferred_fit.worst_mev == pytest.approx(0, abs=1e-9)


def test_evidence_stands_out_of_noise() -> None:
    """5 meV on every hopping: readings no longer fit to rounding, the right one still first."""
    harmonics, shells = MODEL.basis.harmonics.copy(), MODEL.basis.shells.copy()
    harmonics[:2] = harmonics[2:4]
    shells[:2] = 2
    found = check(replace(MODEL.basis, harmonics=harmonics, shells=shells), noise_ev=0.005)
    assert found.inferred.reliability == "good"
    assert found.disagreeing == (0, 1)
    assert found.corrections[0].reading.flipped == (0, 1)
