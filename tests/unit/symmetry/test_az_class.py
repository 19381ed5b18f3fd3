"""Symmetry classes of models whose class the literature states.

Classes and their invariants: Schnyder, Ryu, Furusaki, Ludwig, PRB 78, 195125 (2008),
doi:10.1103/PhysRevB.78.195125; period two and eight: Kitaev, AIP Conf. Proc. 1134, 22 (2009),
doi:10.1063/1.3149495.
"""

from __future__ import annotations

import numpy as np
import pytest

from lattice_models import (
    SIGMA,
    atomic_insulator,
    bhz,
    fu_kane_mele,
    kane_mele,
    wilson_dirac,
)
from topovet.arrays import ComplexArray
from topovet.model.fourier import build_bloch_sum
from topovet.model.hamiltonian import TightBindingModel, build_model
from topovet.symmetry.az_class import CLASSES, AzClass, find_az_class
from topovet.symmetry.time_reversal import measure_time_reversal

LINE, PLANE, SPACE = (True, False, False), (True, True, False), (True, True, True)
ONE = np.eye(2, dtype=complex)


def class_of(model: TightBindingModel, periodic: tuple[bool, bool, bool]) -> AzClass:
    bloch = build_bloch_sum(model)
    return find_az_class(model, bloch, measure_time_reversal(model, bloch, periodic), periodic)


def model_of(
    onsite: ComplexArray,
    hoppings: dict[tuple[int, int, int], ComplexArray],
    *,
    spinful: bool,
) -> TightBindingModel:
    """From the blocks of H(0) and of one of each pair R, -R."""
    cells = [(0, 0, 0), *hoppings, *((-x, -y, -z) for x, y, z in hoppings)]
    blocks = [onsite, *hoppings.values(), *(h.conj().T for h in hoppings.values())]
    return build_model(np.array(cells), np.array(blocks, dtype=complex), spinful=spinful)


def ssh(*, level: float = 0.0, flux: float = 0.0) -> TightBindingModel:
    """Su, Schrieffer, Heeger, PRL 42, 1698 (1979): two sites per cell, alternating bonds.

    With a third, imaginary bond between the two kinds of sites time reversal is gone.
    """
    onsite = np.array([[3.0 + level, 1.0], [1.0, 3.0 - level]])
    between = np.array([[0, 1j * flux], [1.6, 0]])
    return model_of(onsite, {(1, 0, 0): between}, spinful=False)


def qi_wu_zhang(m: float = 1.0) -> TightBindingModel:
    """sin kx sx + sin ky sy + (m + cos kx + cos ky) sz: Qi, Wu, Zhang, PRB 74, 085308 (2006)."""
    hoppings = {
        (1, 0, 0): 0.5 * SIGMA[2] - 0.5j * SIGMA[0],
        (0, 1, 0): 0.5 * SIGMA[2] - 0.5j * SIGMA[1],
    }
    return model_of(m * SIGMA[2], hoppings, spinful=False)


def graphene(next_nearest: float = 0.0) -> TightBindingModel:
    across = np.array([[0, 0], [-2.7, 0]])
    near = model_of(
        np.array([[0, -2.7], [-2.7, 0]]), {(1, 0, 0): across, (0, 1, 0): across}, spinful=False
    )
    return near if not next_nearest else _with(near, (1, 0, 0), next_nearest * ONE)


def _with(
    model: TightBindingModel, r: tuple[int, int, int], block: ComplexArray
) -> TightBindingModel:
    extra = np.array([block, block.conj().T]) * (0.5 if not any(r) else 1.0)
    r_cells = np.concatenate([model.r_cells, [r, tuple(-x for x in r)]])
    return build_model(r_cells, np.concatenate([model.h_r, extra]), spinful=model.spinful)


def test_table_has_the_period_of_two_and_eight() -> None:
    """Complex classes alternate; real ones, in the order of Bott, are one column shifted by d."""
    names = dict(CLASSES.values())
    assert len(names) == 10
    assert names["A"] == ("0", "Z", "0")
    assert names["AIII"] == ("Z", "0", "Z")
    clock = ("AI", "BDI", "D", "DIII", "AII", "CII", "C", "CI")
    in_zero_dimensions = ("Z", "Z2", "Z2", "0", "2Z", "0", "0", "0")
    for s, name in enumerate(clock):
        for d in (1, 2, 3):
            assert names[name][d - 1] == in_zero_dimensions[(s - d) % 8], (name, d)


@pytest.mark.parametrize(
    ("model", "periodic", "name", "strong"),
    [
        (ssh(), LINE, "BDI", "Z"),
        (ssh(flux=0.5), LINE, "AIII", "Z"),
        (ssh(level=0.2), LINE, "AI", "0"),
        (graphene(), PLANE, "BDI", "0"),
        (graphene(next_nearest=0.1), PLANE, "AI", "0"),
        (qi_wu_zhang(), PLANE, "A", "Z"),
        (atomic_insulator(spinful=False).tight_binding(), SPACE, "AI", "0"),
        (kane_mele().tight_binding(), PLANE, "AII", "Z2"),
        (bhz(m=1.0).tight_binding(), PLANE, "AII", "Z2"),
        (fu_kane_mele().tight_binding(), SPACE, "AII", "Z2"),
        (wilson_dirac(m=-2.0).tight_binding(), SPACE, "AII", "Z2"),
        (wilson_dirac(m=-2.0, zeeman=0.2).tight_binding(), SPACE, "A", "0"),
    ],
)
def test_classes_of_the_literature(
    model: TightBindingModel, periodic: tuple[bool, bool, bool], name: str, strong: str
) -> None:
    found = class_of(model, periodic)
    assert (found.name, found.strong) == (name, strong)
    assert found.dimension == sum(periodic)


def test_sublattices_of_graphene_and_their_violation() -> None:
    """Hopping t2 to next neighbours adds 2 t2 cos k on both sublattices; S H S + H is twice it."""
    found = class_of(graphene(), PLANE)
    assert found.colours == (1, -1)
    assert (found.time_reversal, found.particle_hole, found.sublattice) == (1, 1, 1)
    assert found.sublattice_mev == pytest.approx(0, abs=1e-9)
    assert found.weak == ("Z",)  # winding of lines: edge states of zigzag ribbons
    broken = class_of(graphene(next_nearest=0.1), PLANE)
    assert broken.colours == ()
    assert broken.sublattice_mev == pytest.approx(400, rel=1e-6)  # at k = 0
    assert broken.excluded


def test_mean_energy_is_taken_out() -> None:
    found = class_of(ssh(), LINE)
    assert found.mean_energy_ev == pytest.approx(3.0)
    assert found.sublattice_mev < 1e-9


def test_noise_below_the_tolerance_leaves_the_class() -> None:
    rng = np.random.default_rng(0)
    model = graphene()
    for size, name in ((1e-5, "BDI"), (5e-3, "AI")):
        noise = rng.normal(size=model.h_r.shape)
        noisy = build_model(model.r_cells, model.h_r + size * noise, spinful=False)
        assert class_of(noisy, PLANE).name == name


def test_spinful_graphene_without_spin_orbit_coupling_counts_by_spin_blocks() -> None:
    found = class_of(kane_mele(lambda_so=0.0).tight_binding(), PLANE)
    assert (found.name, found.spin_free, found.time_reversal) == ("BDI", True, 1)
    assert found.colours == (1, -1)
    assert "of each spin block" in found.sentence


def test_rashba_alone_keeps_the_sublattices_and_gives_cii() -> None:
    """Spin-orbit coupling between the sublattices only; both spins of a site have one colour."""
    found = class_of(kane_mele(lambda_so=0.0, lambda_r=0.1).tight_binding(), PLANE)
    assert found.colours == (1, 1, -1, -1)
    assert (found.name, found.particle_hole) == ("CII", -1)


def test_spins_of_opposite_colour_give_diii() -> None:
    """sin kx sx + sin ky sy: S = sz goes against time reversal, (S Theta)^2 = +1."""
    hoppings = {(1, 0, 0): -0.5j * SIGMA[0], (0, 1, 0): -0.5j * SIGMA[1]}
    found = class_of(model_of(0 * ONE, hoppings, spinful=True), PLANE)
    assert found.colours == (1, -1)
    assert (found.name, found.particle_hole, found.strong) == ("DIII", 1, "Z2")


def test_parts_that_fit_time_reversal_differently_fix_no_class() -> None:
    """The DIII model beside a CII one, uncoupled: neither, and it is not passed over in silence."""
    onsite = np.zeros((6, 6), dtype=complex)
    onsite[2:, 2:] = 0.3 * np.kron([[0, 1], [1, 0]], ONE)
    along = np.zeros((6, 6), dtype=complex)
    along[:2, :2] = -0.5j * SIGMA[0]
    along[2:4, 4:] = 0.2j * SIGMA[2]
    found = class_of(model_of(onsite, {(1, 0, 0): along}, spinful=True), LINE)
    assert found.name == "AII"
    assert found.colours == ()
    assert found.sublattice_mev < 1e-9
    assert "goes with time reversal" in found.sentence


def test_what_is_not_searched_is_not_excluded() -> None:
    """The Qi-Wu-Zhang spectrum is its own mirror image, by an operator that mixes the functions."""
    found = class_of(qi_wu_zhang(), PLANE)
    assert found.pairing_mev < 1e-9
    assert not found.excluded
    assert "not excluded" in found.sentence
    assert "an integer" in found.sentence


def test_sentence_names_what_can_exist() -> None:
    found = class_of(wilson_dirac(m=-2.0).tight_binding(), SPACE)
    assert found.excluded
    assert found.sentence.startswith("Class AII in 3 dimensions: time reversal squares to −1.")
    assert "Strong invariant: a Z2 index; of lower-dimensional sections: a Z2 index." in (
        found.sentence
    )
    nothing = class_of(atomic_insulator(spinful=False).tight_binding(), SPACE)
    assert "No strong or weak index can be nontrivial" in nothing.sentence
