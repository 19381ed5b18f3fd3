"""Two Hamiltonians are mixed only where they are written in the same functions."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from deformation_ends import end_of, from_another_cell, interchanged, turned, without_spin
from lattice_models import bhz, fu_kane_mele, kane_mele, wilson_dirac
from topovet.deformation.comparison import (
    LEAST_OVERLAP,
    EndMember,
    NotComparableError,
    compare_ends,
)
from topovet.model.crystal import Crystal
from topovet.model.hamiltonian import build_model

A = end_of(wilson_dirac(m=-3.6), name="first")
B = end_of(wilson_dirac(m=-2.2, c=1.1), name="second")


def _with_cell(end: EndMember, cell: np.ndarray) -> EndMember:
    crystal = end.crystal
    moved = Crystal(cell, crystal.symbols, crystal.positions_frac, crystal.periodic)
    return replace(end, crystal=moved)


def test_the_same_functions_overlap() -> None:
    found = compare_ends(A, B).comparison
    assert found.overlap > 0.99
    assert found.least_overlap > 0.99
    assert found.functions == "declared"
    assert found.displacement_ang == 0
    assert found.stretches == pytest.approx((1, 1, 1))


def test_overlap_is_that_of_its_formula() -> None:
    """Against the trace formula in a plain loop, the diagonal of R = 0 left out."""
    sizes = [0.0, 0.0]
    product = 0.0
    for r, one, two in zip(A.model.r_cells, A.model.h_r, B.model.h_r, strict=True):
        keep = 1 - np.eye(8) if not r.any() else np.ones((8, 8))
        one, two = keep * one, keep * two
        product += np.trace(one.conj().T @ two).real
        sizes = [sizes[0] + np.sum(np.abs(one) ** 2), sizes[1] + np.sum(np.abs(two) ** 2)]
    assert compare_ends(A, B).comparison.overlap == pytest.approx(product / np.prod(sizes) ** 0.5)


@pytest.mark.parametrize(
    ("other", "says"),
    [
        (end_of(bhz(m=1.0), name="layer"), "8 Wannier functions and layer has 6: the two"),
        (replace(B, filling=4), "2 filled bands and second has 4"),
        (turned(B, [0, 1]), "signs of Wannier functions 1, 2"),
        (turned(B, [2]), "signs of Wannier function 3"),
        (interchanged(B, 0, 1), "Wannier function"),
        (from_another_cell(B, 0), "Wannier function 1"),
        (_with_cell(B, 1.3 * B.crystal.cell), "stretched by factors from 1.300 to 1.300"),
        (_with_cell(B, B.crystal.cell[[1, 0, 2]]), "turned by"),
    ],
    ids=["size", "filling", "signs", "one sign", "order", "home cell", "stretch", "setting"],
)
def test_what_is_refused(other: EndMember, says: str) -> None:
    with pytest.raises(NotComparableError, match=says):
        compare_ends(A, other)


def test_another_dimension_is_refused() -> None:
    flat = replace(A, crystal=replace(A.crystal, periodic=(True, True, False)), name="flat")
    with pytest.raises(NotComparableError, match="first is 3-dimensional and flat 2-dimensional"):
        compare_ends(A, flat)


def test_another_declaration_is_refused() -> None:
    assert B.basis is not None
    order = np.array([0, 1, 4, 5, 2, 3, 6, 7])
    other = replace(B, basis=B.basis.reordered(order))
    with pytest.raises(NotComparableError, match="function 3 is declared as Bi1 pz up"):
        compare_ends(A, other)


def test_a_site_elsewhere_is_refused() -> None:
    end = end_of(kane_mele(), inversion=False)
    assert end.basis is not None
    sites = np.array(end.basis.positions_frac)
    sites[2:] += [1, 0, 0]
    other = replace(end, basis=replace(end.basis, positions_frac=sites), name="other")
    with pytest.raises(NotComparableError, match="moves by"):
        compare_ends(end, other)


def test_a_weakly_coupled_set_turned_as_a_whole_is_found() -> None:
    """Two layers that hardly touch: every row overlaps by more than the threshold all the same."""
    layer = wilson_dirac(m=-2.0)
    home = np.flatnonzero(~layer.r_cells.any(axis=1))[0]
    h_r = np.zeros((len(layer.r_cells), 16, 16), dtype=complex)
    h_r[:, :8, :8] = h_r[:, 8:, 8:] = layer.h_r
    h_r[home, :8, 8:] = h_r[home, 8:, :8] = 0.01 * np.eye(8)
    model = build_model(layer.r_cells, h_r, spinful=True)
    one = replace(A, model=model, basis=None, inversion=None)
    two = turned(one, list(range(8)))
    rows = [
        np.sum(x * y.conj()).real for x, y in zip(model.h_r[:, 0], two.model.h_r[:, 0], strict=True)
    ]
    assert sum(rows) / np.sum(np.abs(model.h_r[:, 0]) ** 2) > LEAST_OVERLAP
    compare_ends(one, one)
    with pytest.raises(NotComparableError, match="signs of Wannier functions 1, 2, 3"):
        compare_ends(one, two)


def test_without_declarations_only_the_overlap_speaks() -> None:
    found = compare_ends(replace(A, basis=None), B).comparison
    assert found.functions == "first declares no orbitals: only the overlap of H(R) speaks for them"
    assert found.displacement_ang is None


def test_a_spinless_end_is_taken_for_either_spin() -> None:
    """fu_kane_mele without spin-orbit coupling is its spinless hopping for up and down."""
    full = end_of(fu_kane_mele(lambda_so=0.0), name="with spin")
    bare = without_spin(full, name="without")
    for pair, side in ((compare_ends(bare, full), "A"), (compare_ends(full, bare), "B")):
        assert pair.comparison.spin_added == side
        assert pair.comparison.overlap == pytest.approx(1)
        np.testing.assert_allclose(pair.a.model.h_r, pair.b.model.h_r, atol=1e-12)
        assert pair.a.filling == pair.b.filling == full.filling
        assert pair.a.inversion is not None
        assert pair.b.inversion is not None
        np.testing.assert_array_equal(pair.a.inversion.matrix, pair.b.inversion.matrix)


def test_a_spinless_end_of_another_size_is_refused_with_its_spin_counted() -> None:
    full = end_of(fu_kane_mele(lambda_so=0.0))
    bare = without_spin(full, name="bare")
    with pytest.raises(
        NotComparableError, match=r"8 .* bare has 4 \(the spinless one counted twice"
    ):
        compare_ends(A, bare)


def test_substituted_species_are_told() -> None:
    crystal = replace(B.crystal, symbols=("Sb",))
    assert compare_ends(A, replace(B, crystal=crystal)).comparison.substitutions == ("Bi -> Sb",)
