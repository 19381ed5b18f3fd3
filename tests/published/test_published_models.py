"""Lattice models at the parameters of their papers and on both sides of every transition.

Sources are in the docstrings of `lattice_models`; each test names the equation it stands on.
"""

from __future__ import annotations

import itertools

import numpy as np
import pytest
from scipy.optimize import brentq

from lattice_models import (
    LatticeModel,
    atomic_insulator,
    bhz,
    fu_kane_mele,
    kane_mele,
    wilson_dirac,
)
from model_changes import parity_of
from topovet.invariants.results import ParityWitness
from topovet.model.fourier import build_bloch_sum
from topovet.spectrum.eigen import mesh_eigenvalues
from topovet.spectrum.gap import choose_mesh, sample_gap
from topovet.spectrum.results import GapSample
from topovet.symmetry.inversion import build_inversion, measure_inversion
from topovet.symmetry.results import InversionTest
from topovet.symmetry.time_reversal import measure_time_reversal

CORNER = (1 / 3, 1 / 3, 0.0)
"""K of the honeycomb lattice for lattice vectors at 120 degrees."""


def direct_gap(model: LatticeModel, k_frac: tuple[float, ...]) -> float:
    """E[N] - E[N-1] at one k from the model's own plain sum."""
    energies = np.linalg.eigvalsh(model.hamiltonian_at(k_frac))
    return float(energies[model.filling] - energies[model.filling - 1])


def deltas(witness: ParityWitness) -> dict[tuple[float, float, float], int]:
    return {t.k: t.delta for t in witness.trim}


def inversion_test(model: LatticeModel) -> InversionTest:
    tight_binding = model.tight_binding()
    inversion = build_inversion(model.basis, model.crystal, np.array(model.centre))
    bloch = build_bloch_sum(tight_binding)
    return measure_inversion(tight_binding, bloch, inversion, model.crystal.periodic)


EXACT = [
    kane_mele(),
    bhz(m=1.0, d=0.2),
    wilson_dirac(m=-2.0),
    fu_kane_mele(dt=(0.4, 0, 0, 0)),
    atomic_insulator(filled="p"),
    atomic_insulator(filled="s"),
]


@pytest.mark.parametrize("model", EXACT, ids=lambda m: m.name)
def test_models_have_the_symmetries_of_their_papers(model: LatticeModel) -> None:
    """Time reversal with interlaced spin and inversion hold to rounding in all of them."""
    tight_binding = model.tight_binding()
    time_reversal = measure_time_reversal(
        tight_binding, build_bloch_sum(tight_binding), model.crystal.periodic
    )
    assert time_reversal.present
    assert time_reversal.violation_mev < 1e-9
    assert time_reversal.kramers_splitting_mev is not None
    assert time_reversal.kramers_splitting_mev < 1e-9
    inversion = inversion_test(model)
    assert inversion.violation_mev is not None
    assert inversion.violation_mev < 1e-9
    assert inversion.violation_r_mev is not None
    assert inversion.violation_r_mev < 1e-9


def sampled_gap(model: LatticeModel, *, even: bool = True) -> GapSample:
    bloch = build_bloch_sum(model.tight_binding())
    mesh = choose_mesh(model.crystal, "standard")
    return sample_gap(bloch, mesh_eigenvalues(bloch, mesh, even=even), model.filling)


class TestKaneMele:
    """PRL 95, 226801 and 146802 (2005)."""

    @pytest.mark.parametrize("lambda_so", [0.06, -0.06, 0.01, 1e-3])
    def test_quantum_spin_hall_phase(self, lambda_so: float) -> None:
        """lambda_v = 0: nu = 1 for either sign of the spin-orbit term; the M points are alike."""
        witness = parity_of(kane_mele(lambda_so=lambda_so))
        assert witness.status == "ok"
        assert witness.z2 == (1,)
        at = deltas(witness)
        assert at[(0.5, 0.0, 0.0)] == at[(0.0, 0.5, 0.0)] == at[(0.5, 0.5, 0.0)]
        assert at[(0.0, 0.0, 0.0)] * at[(0.5, 0.0, 0.0)] == -1

    def test_gap_at_the_corner(self) -> None:
        """|6 sqrt(3) lambda_so - 2 lambda_v|, closing at lambda_v = 3 sqrt(3) lambda_so."""
        critical = 3 * np.sqrt(3) * 0.06
        for lambda_v in (0.0, 0.1, critical - 1e-3, critical, critical + 1e-3, 0.4):
            expected = abs(6 * np.sqrt(3) * 0.06 - 2 * lambda_v)
            found = direct_gap(kane_mele(lambda_v=lambda_v), CORNER)
            assert found == pytest.approx(expected, abs=1e-12)

    @pytest.mark.parametrize("lambda_v", [0.0, 0.1, 0.3, 0.4])
    def test_gap_search_ends_at_the_corner(self, lambda_v: float) -> None:
        gap = sampled_gap(kane_mele(lambda_v=lambda_v))
        assert gap.direct_ev == pytest.approx(abs(6 * np.sqrt(3) * 0.06 - 2 * lambda_v), abs=1e-9)
        assert gap.status == "insulator"

    def test_gap_search_sees_the_transition(self) -> None:
        assert sampled_gap(kane_mele(lambda_v=3 * np.sqrt(3) * 0.06)).status == "gapless"

    @pytest.mark.parametrize(
        ("broken", "size_ev"), [({"lambda_v": 0.03}, 0.03), ({"lambda_r": 0.05}, 0.05)]
    )
    def test_staggered_potential_and_rashba_break_inversion(
        self, broken: dict[str, float], size_ev: float
    ) -> None:
        """Both terms are odd under inversion, so the residual is twice the term."""
        test = inversion_test(kane_mele(**broken))
        assert test.violation_r_mev == pytest.approx(2000 * size_ev, rel=1e-9)

    def test_without_spin_orbit_parities_alone_would_mislead(self) -> None:
        """Graphene: the products at the TRIM are those of nu = 1, but there is no gap at K."""
        graphene = kane_mele(lambda_so=0.0)
        assert parity_of(graphene).z2 == (1,)
        assert direct_gap(graphene, CORNER) < 1e-12
        assert sampled_gap(graphene).status == "gapless"


class TestBernevigHughesZhang:
    """Science 314, 1757 (2006)."""

    @pytest.mark.parametrize(
        ("ratio", "nu", "odd_points"),
        [
            (-1.0, 0, 0),
            (-0.01, 0, 0),
            (0.01, 1, 1),
            (2.0, 1, 1),
            (3.99, 1, 1),
            (4.01, 1, 3),
            (6.0, 1, 3),
            (7.99, 1, 3),
            (8.01, 0, 4),
            (9.0, 0, 4),
        ],
    )
    def test_transitions_at_m_over_b_0_4_8(self, ratio: float, nu: int, odd_points: int) -> None:
        """d3 > 0 fills the p states (odd) at Gamma, then at both X, then at M."""
        witness = parity_of(bhz(m=ratio))
        assert witness.z2 == (nu,)
        masses = {(0.0, 0.0): ratio, (0.5, 0.0): ratio - 4, (0.0, 0.5): ratio - 4,
                  (0.5, 0.5): ratio - 8}  # fmt: skip
        for point in witness.trim:
            mass = masses[point.k[:2]]
            assert point.delta == (-1 if mass > 0 else 1)
            assert point.gap_ev == pytest.approx(2 * abs(mass), abs=1e-12)
        assert sum(t.delta == -1 for t in witness.trim) == odd_points

    @pytest.mark.parametrize(("ratio", "k"), [(0, "0, 0"), (4, "0, 1/2"), (8, "1/2, 1/2")])
    def test_no_index_at_the_transition(self, ratio: float, k: str) -> None:
        witness = parity_of(bhz(m=ratio))
        assert witness.status == "failed"
        assert witness.z2 is None
        assert f"({k}, 0)" in witness.reason

    def test_lattice_bands(self) -> None:
        """E = eps +- sqrt(a^2 (sin^2 kx + sin^2 ky) + d3^2), each twice: the embedding is exact."""
        m, a, b, c, d = 1.3, 0.7, 0.9, 0.1, 0.2
        model = bhz(m=m, a=a, b=b, c=c, d=d)
        for k_frac in np.random.default_rng(3).random((5, 3)):
            kx, ky, _ = 2 * np.pi * k_frac
            eps = c - 2 * d * (2 - np.cos(kx) - np.cos(ky))
            d3 = -2 * b * (2 - m / (2 * b) - np.cos(kx) - np.cos(ky))
            root = np.sqrt(a**2 * (np.sin(kx) ** 2 + np.sin(ky) ** 2) + d3**2)
            energies = np.linalg.eigvalsh(model.hamiltonian_at(k_frac))[:4]
            np.testing.assert_allclose(energies, eps + root * np.array([-1, -1, 1, 1]), atol=1e-12)

    @pytest.mark.parametrize(
        ("well_angstrom", "nu", "parameters"),
        [
            (58, 0, {"a": -3.62, "b": -18.0, "c": -0.0180, "d": -0.594, "m": 0.00922}),
            (70, 1, {"a": -3.42, "b": -16.9, "c": -0.0263, "d": 0.514, "m": -0.00686}),
        ],
    )
    def test_mercury_telluride_wells(
        self, well_angstrom: int, nu: int, parameters: dict[str, float]
    ) -> None:
        """The paper's wells of 58 and 70 A lie on either side of its 64 A transition.

        Parameters of its table, from memory; gaps of 18 and 14 meV in bands 270 eV wide.
        """
        witness = parity_of(bhz(**parameters))
        assert witness.z2 == (nu,)
        assert min(t.gap_ev for t in witness.trim) == pytest.approx(2 * abs(parameters["m"]))


class TestWilsonDirac:
    """PRB 78, 195424 (2008); products of PRB 76, 045302 (2007)."""

    @pytest.mark.parametrize(
        ("m", "z2"),
        [
            (-4.0, (0, 0, 0, 0)),
            (-3.01, (0, 0, 0, 0)),
            (-2.99, (1, 0, 0, 0)),
            (-2.0, (1, 0, 0, 0)),
            (-1.01, (1, 0, 0, 0)),
            (-0.99, (0, 1, 1, 1)),
            (0.0, (0, 1, 1, 1)),
            (0.99, (0, 1, 1, 1)),
            (1.01, (1, 1, 1, 1)),
            (2.0, (1, 1, 1, 1)),
            (2.99, (1, 1, 1, 1)),
            (3.01, (0, 0, 0, 0)),
            (4.0, (0, 0, 0, 0)),
        ],
    )
    def test_phases(self, m: float, z2: tuple[int, ...]) -> None:
        witness = parity_of(wilson_dirac(m=m))
        assert witness.z2 == z2
        for point in witness.trim:
            mass = m + float(np.cos(2 * np.pi * np.array(point.k)).sum())
            assert point.delta == (-1 if mass > 0 else 1)
            assert point.gap_ev == pytest.approx(2 * abs(mass), abs=1e-12)
            assert point.purity == pytest.approx(1.0, abs=1e-12)

    @pytest.mark.parametrize("m", [-3.0, -1.0, 1.0, 3.0])
    def test_no_index_at_the_transition(self, m: float) -> None:
        witness = parity_of(wilson_dirac(m=m))
        assert (witness.status, witness.z2, witness.z4) == ("failed", None, None)
        assert "gap" in witness.reason

    @pytest.mark.parametrize(("m", "z4"), [(-4.0, 0), (-2.0, 3), (0.0, 0), (2.0, 1), (4.0, 0)])
    def test_z4(self, m: float, z4: int) -> None:
        """kappa = (1/4) sum over the TRIM of n+ - n-, odd in the strong phases only.

        Khalaf, Po, Vishwanath, Watanabe, PRX 8, 031070 (2018), doi:10.1103/PhysRevX.8.031070.
        """
        assert parity_of(wilson_dirac(m=m)).z4 == z4

    def test_z4_of_the_weak_phase_depends_on_the_centre(self) -> None:
        """About (1/2, 1/2, 1/2) Gamma and R change places with the rest: 2 instead of 0."""
        by_centre = dict(parity_of(wilson_dirac(m=0.0)).kappa_by_centre)
        assert by_centre[(0.0, 0.0, 0.0)] == 0
        assert by_centre[(0.5, 0.5, 0.5)] == 2

    def test_lattice_bands(self) -> None:
        a, c, m = 0.7, 0.9, -1.7
        model = wilson_dirac(m=m, a=a, c=c)
        for k_frac in np.random.default_rng(4).random((5, 3)):
            sines, cosines = np.sin(2 * np.pi * k_frac), np.cos(2 * np.pi * k_frac)
            root = np.sqrt(a**2 * (sines @ sines) + (m + c * cosines.sum()) ** 2)
            energies = np.linalg.eigvalsh(model.hamiltonian_at(k_frac))[:4]
            np.testing.assert_allclose(energies, root * np.array([-1, -1, 1, 1]), atol=1e-12)

    def test_axion_indicator_without_time_reversal(self) -> None:
        """A strong phase in a weak exchange field: eta = 2, theta = pi.

        Turner, Zhang, Mong, Vishwanath, PRB 85, 165120 (2012), doi:10.1103/PhysRevB.85.165120.
        """
        witness = parity_of(wilson_dirac(m=-2.6, zeeman=0.1), kramers=False)
        assert (witness.status, witness.z2, witness.eta4) == ("ok", None, 2)

    def test_odd_indicator_means_weyl_points(self) -> None:
        """A field above the mass at Gamma swaps one state: eta is odd, nodes on the kz axis.

        There E = +-zeeman +- sqrt(sin^2 kz + mass^2), zero where the root equals the field.
        Hughes, Prodan, Bernevig, PRB 83, 245132 (2011), doi:10.1103/PhysRevB.83.245132.
        """
        m, field = -2.6, 0.8
        model = wilson_dirac(m=m, zeeman=field)
        witness = parity_of(model, kramers=False)
        assert witness.eta4 == 1
        assert min(t.gap_ev for t in witness.trim) > 0.5

        def excess(k: float) -> float:
            angle = 2 * np.pi * k
            return float(np.hypot(np.sin(angle), m + 2 + np.cos(angle)) - field)

        node = brentq(excess, 0.0, 0.25, xtol=1e-15)
        assert direct_gap(model, (0.0, 0.0, node)) < 1e-9
        assert sampled_gap(model, even=False).status == "gapless"


def bond_structure_factor(t: list[float], k_frac: tuple[float, float, float]) -> float:
    """f = t0 + t1 s1 + t2 s2 + t3 s3 at a TRIM, s_i = exp(2 pi i k_i)."""
    signs = np.cos(2 * np.pi * np.array(k_frac))
    return float(t[0] + np.dot(t[1:], signs))


class TestFuKaneMele:
    """PRL 98, 106803 (2007)."""

    BOND_INDICES = ((1, 1, 1), (1, 0, 0), (0, 1, 0), (0, 0, 1))

    @pytest.mark.parametrize("bond", range(4))
    @pytest.mark.parametrize("size", [0.4, 0.02])
    def test_strong_and_weak_phase_of_each_bond(self, bond: int, size: float) -> None:
        """A stronger bond: strong; a weaker one: weak; both with G along that bond."""
        dt = [0.0] * 4
        dt[bond] = size
        assert parity_of(fu_kane_mele(dt=dt)).z2 == (1, *self.BOND_INDICES[bond])
        dt[bond] = -size
        assert parity_of(fu_kane_mele(dt=dt)).z2 == (0, *self.BOND_INDICES[bond])

    @pytest.mark.parametrize("bond", range(4))
    def test_index_vector_is_along_the_bond(self, bond: int) -> None:
        """G_nu = sum nu_i b_i is parallel to the bond, as in the paper, whatever the cell."""
        model = fu_kane_mele()
        nu = np.array(self.BOND_INDICES[bond])
        g_vector = nu @ model.crystal.reciprocal
        cell_shift = np.array([(0, 0, 0), (-1, 0, 0), (0, -1, 0), (0, 0, -1)][bond])
        vector = (np.array([0.25, 0.25, 0.25]) + cell_shift) @ model.crystal.cell
        cosine = g_vector @ vector / np.linalg.norm(g_vector) / np.linalg.norm(vector)
        assert abs(cosine) == pytest.approx(1.0)

    @pytest.mark.parametrize(
        ("dt", "z2"),
        [
            (1.98, (1, 1, 1, 1)),
            (2.02, (0, 0, 0, 0)),
            (-0.98, (0, 1, 1, 1)),
            (-1.98, (0, 1, 1, 1)),
            (-2.02, (1, 0, 0, 0)),
            (3.0, (0, 0, 0, 0)),
        ],
    )
    def test_further_transitions_of_bond_0(self, dt: float, z2: tuple[int, ...]) -> None:
        """f changes sign at one L for dt = 2t (dimers beyond) and at three L for dt = -2t."""
        assert parity_of(fu_kane_mele(dt=(dt, 0, 0, 0))).z2 == z2

    @pytest.mark.parametrize(
        ("dt", "point"), [(0.0, (0.0, 0.5, 0.5)), (2.0, (0.5, 0.5, 0.5)), (-2.0, (0.0, 0.0, 0.5))]
    )
    def test_no_index_at_the_transition(self, dt: float, point: tuple[float, float, float]) -> None:
        model = fu_kane_mele(dt=(dt, 0, 0, 0))
        assert direct_gap(model, point) < 1e-12
        assert sampled_gap(model).status == "gapless"
        witness = parity_of(model)
        assert (witness.status, witness.z2) == ("failed", None)

    @pytest.mark.parametrize("seed", range(5))
    def test_parities_are_the_signs_of_f(self, seed: int) -> None:
        """delta = -sgn f and gap 2|f| at every TRIM, for any four bonds (Fu, Kane, Mele 2007)."""
        bonds = 1 + np.random.default_rng(seed).uniform(-0.8, 0.8, 4)
        witness = parity_of(fu_kane_mele(dt=bonds - 1))
        for point in witness.trim:
            f = bond_structure_factor(list(bonds), point.k)
            assert point.delta == -np.sign(f)
            assert point.gap_ev == pytest.approx(2 * abs(f), abs=1e-9)


class TestAtomicInsulators:
    """Isolated ions, every index 0 (Fu, Kane, PRB 76, 045302)."""

    @pytest.mark.parametrize("filled", ["s", "p"])
    @pytest.mark.parametrize("hop", [0.0, 0.2, 0.35])
    def test_trivial(self, filled: str, hop: float) -> None:
        witness = parity_of(atomic_insulator(filled=filled, hop=hop))
        assert witness.z2 == (0, 0, 0, 0)
        assert witness.z4 == 0

    def test_parities_of_the_anion_alternate(self) -> None:
        """p at (1/2, 1/2, 1/2): parity -exp(2 pi i k.(1, 1, 1)) for each of three pairs."""
        for point in parity_of(atomic_insulator(filled="p")).trim:
            even_halves = round(2 * sum(point.k)) % 2 == 0
            assert (point.n_plus, point.n_minus) == ((0, 6) if even_halves else (6, 0))

    def test_spinless_indicator(self) -> None:
        witness = parity_of(atomic_insulator(filled="p", spinful=False))
        assert (witness.z2, witness.eta4) == (None, 0)
        assert sum(t.n_minus for t in witness.trim) == 12

    def test_every_centre_gives_the_same_verdict(self) -> None:
        model = atomic_insulator(filled="p")
        for centre in itertools.product((0.0, 0.5), repeat=3):
            witness = parity_of(model, centre=centre)
            assert (witness.z2, witness.z4) == ((0, 0, 0, 0), 0)
