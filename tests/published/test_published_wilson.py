"""Phase diagrams of the literature by Wilson loops: Z2, Chern and mirror Chern numbers.

Sources are in the docstrings of `chern_models` and `lattice_models`.
"""

from __future__ import annotations

import numpy as np
import pytest

from chern_models import (
    chiral_wilson_dirac,
    double_wilson_dirac,
    haldane,
    hofstadter,
    layered_bhz,
    qi_wu_zhang,
    snte,
    snte_mirror,
    staggered,
    zeeman,
)
from lattice_models import (
    LatticeModel,
    atomic_insulator,
    bhz,
    fu_kane_mele,
    kane_mele,
    wilson_dirac,
)
from model_changes import parity_of
from topovet.arrays import ComplexArray, FloatArray
from topovet.invariants.chern import compute_chern
from topovet.invariants.mirror_chern import compute_mirror_chern
from topovet.invariants.results import MirrorChern, WilsonWitness
from topovet.invariants.wilson_witness import compute_wilson
from topovet.model.fourier import build_bloch_sum
from topovet.model.plane import KPlane
from topovet.spectrum.eigen import mesh_eigenvalues
from topovet.spectrum.gap import choose_mesh, sample_gap
from topovet.symmetry.inversion import build_inversion, measure_inversion
from topovet.symmetry.time_reversal import measure_time_reversal


def wilson_of(model: LatticeModel, *, time_reversal: bool = True) -> WilsonWitness:
    return compute_wilson(
        build_bloch_sum(model.tight_binding()),
        model.filling,
        model.crystal.periodic,
        time_reversal=time_reversal,
        spinful=model.spinful,
    )


def chern_of(model: LatticeModel) -> tuple[int, ...] | None:
    bloch = build_bloch_sum(model.tight_binding())
    return compute_chern(bloch, model.filling, model.crystal.periodic).chern


def inversion_violation_mev(model: LatticeModel) -> float:
    tight_binding = model.tight_binding()
    inversion = build_inversion(model.basis, model.crystal, np.array(model.centre))
    bloch = build_bloch_sum(tight_binding)
    violation = measure_inversion(
        tight_binding, bloch, inversion, model.crystal.periodic
    ).violation_mev
    assert violation is not None
    return violation


def has_time_reversal(model: LatticeModel) -> bool:
    tight_binding = model.tight_binding()
    bloch = build_bloch_sum(tight_binding)
    return measure_time_reversal(tight_binding, bloch, model.crystal.periodic).present


class TestHaldane:
    """PRL 61, 2015 (1988), Fig. 2: boundary |M/t2| = 3 sqrt(3) |sin phi|."""

    @pytest.mark.parametrize("phi", [0.3, np.pi / 2, 2.6, -0.8, -np.pi / 2, -2.9])
    @pytest.mark.parametrize("share", [0.0, 0.5, 0.97, -0.97, 1.03, -1.03, 2.0])
    def test_phase_diagram(self, phi: float, share: float) -> None:
        """C = -sign(sin phi) inside the lobes, in the orientation of this cell; 0 outside."""
        boundary = 3 * np.sqrt(3) * 0.1 * np.sin(phi)
        expected = -int(np.sign(np.sin(phi))) if abs(share) < 1 else 0
        assert chern_of(haldane(phi=phi, m=share * boundary)) == (expected,)

    @pytest.mark.parametrize("phi", [0.3, np.pi / 2, -2.0])
    def test_the_boundary_itself_is_gapless(self, phi: float) -> None:
        assert chern_of(haldane(phi=phi, m=3 * np.sqrt(3) * 0.1 * np.sin(phi))) is None


def solid_angle_chern(m: float, n: int = 300) -> float:
    """(1/4 pi) integral of n.(dn/dkx x dn/dky) for the lower band of Qi-Wu-Zhang, by quadrature."""
    k = 2 * np.pi * np.arange(n) / n
    kx, ky = np.meshgrid(k, k, indexing="ij")
    zero = np.zeros_like(kx)
    d = np.stack([np.sin(kx), np.sin(ky), m + np.cos(kx) + np.cos(ky)])
    d_x = np.stack([np.cos(kx), zero, -np.sin(kx)])
    d_y = np.stack([zero, np.cos(ky), -np.sin(ky)])
    density = (d * np.cross(d_x, d_y, axis=0)).sum(axis=0) / np.linalg.norm(d, axis=0) ** 3
    return float(density.mean() * np.pi)


class TestQiWuZhang:
    """PRB 74, 085308 (2006): the integral of Eq. 10 and its values below Eq. 12."""

    @pytest.mark.parametrize("m", [-3.0, -2.2, -1.8, -1.0, -0.2, 0.2, 1.0, 1.8, 2.2, 3.0])
    def test_sign_and_value(self, m: float) -> None:
        expected = 0 if abs(m) > 2 else -int(np.sign(m))
        assert solid_angle_chern(m) == pytest.approx(expected, abs=1e-6)
        assert chern_of(qi_wu_zhang(m=m)) == (expected,)


class TestHofstadter:
    """PRL 49, 405 (1982): r = q s + p t with |t| <= q/2 gives the Chern number below gap r."""

    @pytest.mark.parametrize(("p", "q"), [(1, 3), (2, 3), (1, 5), (2, 5), (3, 7)])
    def test_diophantine_equation(self, p: int, q: int) -> None:
        for r in range(1, q):
            (t,) = (t for t in range(-(q // 2), q // 2 + 1) if (r - p * t) % q == 0)
            assert chern_of(hofstadter(p=p, q=q, filling=r)) == (t,)


class TestKaneMele:
    """PRL 95, 146802 (2005), Fig. 1. At K the levels are D + v, D - v and -D +- sqrt(v^2 + 9 R^2)
    with D = 3 sqrt(3) lambda_so, v = lambda_v, R = lambda_r: they meet at half filling where
    v = D - 9 R^2/(4 D), which ends at v = 3 sqrt(3) lambda_so and R = 2 sqrt(3) lambda_so."""

    SO = 0.06
    D = 3 * np.sqrt(3) * SO

    @pytest.mark.parametrize("share", [0.0, 0.25, 0.5, 0.75, 0.95])
    @pytest.mark.parametrize("sign", [1, -1])
    def test_boundary(self, share: float, sign: int) -> None:
        rashba = share * 2 * np.sqrt(3) * self.SO
        critical = self.D - 9 * rashba**2 / (4 * self.D)
        for factor, nu in ((0.97, 1), (1.03, 0)):
            v = sign * factor * critical
            assert wilson_of(kane_mele(lambda_v=v, lambda_r=rashba)).z2 == (nu,)

    def test_rashba_alone(self) -> None:
        """Without a staggered potential the phase reaches to lambda_r = 2 sqrt(3) lambda_so."""
        critical = 2 * np.sqrt(3) * self.SO
        assert wilson_of(kane_mele(lambda_r=0.98 * critical)).z2 == (1,)
        assert wilson_of(kane_mele(lambda_r=critical)).z2 is None

    def test_published_points(self) -> None:
        """The two of Fig. 1: lambda_so = 0.06 t, lambda_r = 0.05 t, lambda_v = 0.1 t and 0.4 t."""
        assert wilson_of(kane_mele(lambda_so=0.06, lambda_r=0.05, lambda_v=0.1)).z2 == (1,)
        assert wilson_of(kane_mele(lambda_so=0.06, lambda_r=0.05, lambda_v=0.4)).z2 == (0,)


class TestCentrosymmetric:
    @pytest.mark.parametrize(
        ("m", "nu"), [(-0.5, 0), (0.5, 1), (3.5, 1), (4.5, 1), (7.5, 1), (8.5, 0)]
    )
    def test_bhz(self, m: float, nu: int) -> None:
        """Science 314, 1757 (2006): nontrivial between the inversions at Gamma and at M."""
        assert wilson_of(bhz(m=m)).z2 == (nu,)

    @pytest.mark.parametrize(
        ("dt", "z2"),
        [
            ((0.4, 0, 0, 0), (1, 1, 1, 1)),
            ((0, 0.4, 0, 0), (1, 1, 0, 0)),
            ((0, 0, 0.4, 0), (1, 0, 1, 0)),
            ((0, 0, 0, 0.4), (1, 0, 0, 1)),
            ((-0.4, 0, 0, 0), (0, 1, 1, 1)),
            ((2.5, 0, 0, 0), (0, 0, 0, 0)),
        ],
    )
    def test_fu_kane_mele(self, dt: tuple[float, ...], z2: tuple[int, ...]) -> None:
        """PRL 98, 106803 (2007): strong, weak and trivial phases."""
        witness = wilson_of(fu_kane_mele(dt=dt))
        assert witness.z2 == z2
        assert set(witness.nu0_determinations) == {z2[0]}

    @pytest.mark.parametrize(
        ("m", "z2"),
        [
            (-3.3, (0, 0, 0, 0)),
            (-2.0, (1, 0, 0, 0)),
            (0.4, (0, 1, 1, 1)),
            (2.0, (1, 1, 1, 1)),
            (3.3, (0, 0, 0, 0)),
        ],
    )
    def test_wilson_dirac(self, m: float, z2: tuple[int, ...]) -> None:
        assert wilson_of(wilson_dirac(m=m)).z2 == z2

    def test_layers(self) -> None:
        """A stack of quantum spin Hall layers: 0;(001), and trivial where the layers are."""
        assert wilson_of(layered_bhz(m=1.5)).z2 == (0, 0, 0, 1)
        assert wilson_of(layered_bhz(m=-1.5)).z2 == (0, 0, 0, 0)

    def test_double_strong(self) -> None:
        """Two strong phases: every Z2 trivial, though the inversion indicator is 2."""
        model = double_wilson_dirac()
        assert wilson_of(model).z2 == (0, 0, 0, 0)
        parity = parity_of(model)
        assert (parity.z2, parity.z4) == ((0, 0, 0, 0), 2)

    @pytest.mark.parametrize("filled", ["s", "p"])
    def test_atomic_insulator(self, filled: str) -> None:
        assert wilson_of(atomic_insulator(filled=filled)).z2 == (0, 0, 0, 0)


class TestBrokenInversion:
    """Parity is silent, or would lie; Wilson loops need time reversal only."""

    @pytest.mark.parametrize(
        ("model", "z2"),
        [
            (staggered(fu_kane_mele(dt=(0.4, 0, 0, 0)), 0.4), (1, 1, 1, 1)),
            (staggered(fu_kane_mele(dt=(0, 0.4, 0, 0)), 0.4), (1, 1, 0, 0)),
            (staggered(fu_kane_mele(dt=(0.4, 0, 0, 0)), 1.2), (0, 0, 0, 0)),
            (chiral_wilson_dirac(m=-2.0, u=0.6), (1, 0, 0, 0)),
            (chiral_wilson_dirac(m=2.0, u=0.6), (1, 1, 1, 1)),
            (chiral_wilson_dirac(m=-2.0, u=1.5), (0, 0, 0, 0)),
        ],
    )
    def test_indices(self, model: LatticeModel, z2: tuple[int, ...]) -> None:
        assert has_time_reversal(model)
        assert inversion_violation_mev(model) > 100
        assert wilson_of(model).z2 == z2

    @pytest.mark.parametrize(
        ("build", "steps"),
        [
            (lambda v: staggered(fu_kane_mele(dt=(0.4, 0, 0, 0)), v), np.linspace(0, 0.4, 5)),
            (lambda u: chiral_wilson_dirac(m=-2.0, u=u), np.linspace(0, 0.6, 5)),
        ],
    )
    def test_they_are_those_of_the_symmetric_phase(self, build: object, steps: FloatArray) -> None:
        """Adiabatic continuity: the gap stays open on the way from the symmetric model."""
        assert callable(build)
        for step in steps:
            model = build(step)
            bloch = build_bloch_sum(model.tight_binding())
            mesh = choose_mesh(model.crystal, "quick")
            energies = mesh_eigenvalues(bloch, mesh, even=True)
            assert sample_gap(bloch, energies, model.filling).direct_ev > 0.2

    def test_strong_and_trivial_are_parted_by_weyl_points(self) -> None:
        """Murakami, New J. Phys. 9, 356 (2007), doi:10.1088/1367-2630/9/9/356: without inversion
        the transition is a stretch of gapless phase; the invariant planes stay gapped in it."""
        model = staggered(fu_kane_mele(dt=(0.4, 0, 0, 0)), 0.8)
        bloch = build_bloch_sum(model.tight_binding())
        mesh = choose_mesh(model.crystal, "standard")
        gap = sample_gap(bloch, mesh_eigenvalues(bloch, mesh, even=True), model.filling)
        assert gap.direct_ev < 1e-3
        witness = wilson_of(model)
        assert min(plane.smallest_direct_gap_ev for plane in witness.planes) > 0.01


class TestZeeman:
    """A field breaks time reversal: there is no Z2 to be had, whatever the bands look like."""

    def test_no_index(self) -> None:
        model = zeeman(fu_kane_mele(dt=(0.4, 0, 0, 0)), 0.05)
        assert not has_time_reversal(model)
        witness = wilson_of(model, time_reversal=has_time_reversal(model))
        assert (witness.status, witness.z2) == ("not-applicable", None)

    def test_chern_vector_of_a_weak_field(self) -> None:
        """Still gapped, without planes of net Berry flux."""
        assert chern_of(zeeman(fu_kane_mele(dt=(0.4, 0, 0, 0)), 0.05)) == (0, 0, 0)


class TestMirrorChern:
    """Hsieh et al., Nat. Commun. 3, 982 (2012): |n_M| = 2 for SnTe on the (110) mirror planes."""

    PLANE = KPlane("x=y", (0.0, 0.0, 0.0), (1, 1, 0), (0, 0, 1))

    def mirror_of(self, model: LatticeModel) -> MirrorChern:
        def mirror_at(k_frac: FloatArray) -> ComplexArray:
            return np.broadcast_to(snte_mirror(), (len(k_frac), 12, 12))

        bloch = build_bloch_sum(model.tight_binding())
        return compute_mirror_chern(bloch, self.PLANE, mirror_at, model.filling)

    def test_tin_telluride(self) -> None:
        found = self.mirror_of(snte())
        assert found.status == "ok"
        assert abs(found.mirror_chern or 0) == 2

    def test_without_band_inversion(self) -> None:
        assert self.mirror_of(snte(m=4.0)).mirror_chern == 0

    @pytest.mark.parametrize("m", [1.65, 4.0])
    def test_no_z2_tells_them_apart(self, m: float) -> None:
        """Four L points invert: all Z2 vanish, by both witnesses."""
        model = snte(m=m)
        assert wilson_of(model).z2 == parity_of(model).z2 == (0, 0, 0, 0)

    def test_inversion_is_at_four_l_points(self) -> None:
        """Between the two phases the parity balance changes at the L points and nowhere else."""
        inverted, normal = (
            {t.k: t.n_minus for t in parity_of(snte(m=m)).trim} for m in (1.65, 4.0)
        )
        changed = {k for k in inverted if inverted[k] != normal[k]}
        assert changed == {(0.5, 0.5, 0.5), (0.5, 0.0, 0.0), (0.0, 0.5, 0.0), (0.0, 0.0, 0.5)}
