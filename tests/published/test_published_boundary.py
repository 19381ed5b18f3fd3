"""Edge and surface states of the literature's models: dispersions, parities, signed counts."""

from __future__ import annotations

import numpy as np
import pytest

from boundary_models import prepared, surface_of
from chern_models import (
    chern_stack,
    double_wilson_dirac,
    haldane,
    hofstadter,
    layered_bhz,
    qi_wu_zhang,
)
from lattice_models import bhz, fu_kane_mele, kane_mele, wilson_dirac
from topovet.boundary.greens import decimate
from topovet.boundary.layers import principal_blocks
from topovet.boundary.recut import recut


def _nearest_levels(model, miller, k: float, energy: float) -> tuple[float, float]:
    """Smallest |eigenvalue| of E - eps on the two edges."""
    _, _, stack = prepared(model, miller)
    blocks = principal_blocks(stack.planes_at(np.array([[k, 0.0]])))
    found = decimate(*blocks, np.array([energy]))
    assert found.converged.all()
    at = energy * np.eye(stack.layer_size)
    upper, lower = (np.abs(np.linalg.eigvalsh(at - e)) for e in (found.upper[0], found.lower[0]))
    return float(upper.min()), float(lower.min())


@pytest.mark.parametrize("k", [0.37, 0.43, 0.49, 0.52, 0.61])
def test_qi_wu_zhang_edges_disperse_as_sin_k(k: float) -> None:
    """E = +sin k on one edge, -sin k on the other, where |m + cos k| < 1.

    The ansatz with sigma_y psi = +-psi on a half-plane solves the model exactly. Source: Qi, Wu,
    Zhang, PRB 74, 085308 (2006), doi:10.1103/PhysRevB.74.085308 (their Fig. 2); closed form as in
    Asboth, Oroszlany, Palyi (Springer LNP 919, 2016), chapter 6 (from memory).
    """
    model = qi_wu_zhang(m=1.0)
    slope = float(recut(model.crystal, (0, 1, 0)).matrix[0, 0])  # k' runs along a'_1 = +-a_1
    level = float(np.sin(2 * np.pi * k * slope))
    here = [_nearest_levels(model, (0, 1, 0), k, e + 1e-7) for e in (level, -level)]
    # one edge has it at +sin k and not at -sin k, the other the other way round
    upper, lower = here[0][0] < here[1][0], here[0][1] < here[1][1]
    assert upper != lower
    for edge, on_plus in ((0, upper), (1, lower)):
        assert here[0 if on_plus else 1][edge] < 1e-5
        if abs(level) > 0.1:
            assert here[1 if on_plus else 0][edge] > 1e-2


def test_qi_wu_zhang_edge_states_end_where_they_merge() -> None:
    """At |m + cos k| > 1 there is no edge level: k = 0.2 of the zone, cos k = 0.31, m = 1."""
    k, model = 0.2, qi_wu_zhang(m=1.0)
    level = float(np.sin(2 * np.pi * k))
    for energy in (0.9 * level, -0.9 * level, 0.01):
        assert min(_nearest_levels(model, (0, 1, 0), k, energy)) > 1e-2


@pytest.mark.parametrize(("a", "k"), [(1.0, 0.05), (0.7, 0.08), (0.7, -0.03)])
def test_quantum_well_edges_disperse_linearly(a: float, k: float) -> None:
    """E = +-a sin k on every edge, one Kramers pair: velocity a at the Dirac point.

    Source: Koenig, Buhmann, Molenkamp, Hughes, Liu, Qi, Zhang, J. Phys. Soc. Jpn. 77, 031007
    (2008), doi:10.1143/JPSJ.77.031007 (edge states of the BHZ lattice model; form from memory).
    """
    level = a * np.sin(2 * np.pi * k)
    for sign in (1, -1):
        assert max(_nearest_levels(bhz(m=1.0, a=a), (0, 1, 0), k, sign * level + 1e-7)) < 1e-5
        assert min(_nearest_levels(bhz(m=-1.0, a=a), (0, 1, 0), k, sign * level + 1e-7)) > 1e-2


@pytest.mark.parametrize(
    ("m", "z2"),
    [
        (-3.5, (0, 0, 0, 0)),
        (-2.0, (1, 0, 0, 0)),
        (0.3, (0, 1, 1, 1)),
        (2.0, (1, 1, 1, 1)),
        (3.5, (0, 0, 0, 0)),
    ],
)
@pytest.mark.parametrize("miller", [(0, 0, 1), (1, 0, 0), (1, 1, 1), (1, 1, 0), (2, 1, 0)])
def test_wilson_dirac_surfaces(m: float, z2: tuple[int, ...], miller) -> None:
    """Crossings against Fu and Kane's products over the TRIM (see `wilson_dirac`)."""
    found = surface_of(wilson_dirac(m=m), miller, kramers=True)
    assert found.status == "ok"
    assert found.z2[0] == z2[0]
    assert all(a in (None, b) for a, b in zip(found.z2, z2, strict=True))


@pytest.mark.parametrize(("dt", "z2"), [((0.4, 0.0, 0.0, 0.0), 1), ((-0.4, 0.0, 0.0, 0.0), 0)])
@pytest.mark.parametrize("miller", [(1, 1, 1), (0, 0, 1)])
def test_fu_kane_mele_surfaces(dt, z2: int, miller) -> None:
    """Strong for the strengthened 111 bond, weak for the weakened one.

    Source: Fu, Kane, Mele, PRL 98, 106803 (2007), doi:10.1103/PhysRevLett.98.106803, Fig. 1.
    """
    model = fu_kane_mele(dt=dt)
    assert surface_of(model, miller, kramers=True).z2_strong == z2


def test_the_dark_side_of_a_weak_insulator() -> None:
    """A stack of quantum spin Hall layers shows nothing on top and an even number on its side.

    Source: Fu, Kane, Mele 2007 (see above), discussion of weak topological insulators.
    """
    top = surface_of(layered_bhz(), (0, 0, 1), kramers=True)
    assert (top.z2, [line.parity for line in top.lines]) == ((0, None, 0, None), [0, 0])
    side = surface_of(layered_bhz(), (1, 0, 0), kramers=True)
    assert side.z2_strong == 0
    assert sorted(line.parity for line in side.lines) in ([0, 0], [1, 1])
    assert 1 in side.z2 or [line.parity for line in side.lines] == [0, 0]


def test_two_copies_cross_an_even_number_of_times() -> None:
    """Indices add up modulo 2; see `double_wilson_dirac`."""
    assert surface_of(double_wilson_dirac(), (0, 0, 1), kramers=True).z2_strong == 0


@pytest.mark.parametrize(
    ("lambda_v", "lambda_r", "nu"),
    [(0.0, 0.0, 1), (0.1, 0.05, 1), (0.4, 0.0, 0), (0.4, 0.05, 0)],
)
@pytest.mark.parametrize("miller", [(0, 1, 0), (1, 1, 0), (1, 2, 0)])
def test_kane_mele_edges(lambda_v: float, lambda_r: float, nu: int, miller) -> None:
    """Zigzag, armchair and between; inversion is broken by both terms.

    Source: Kane, Mele, PRL 95, 146802 (2005), doi:10.1103/PhysRevLett.95.146802, Fig. 1.
    """
    model = kane_mele(lambda_so=0.06, lambda_v=lambda_v, lambda_r=lambda_r)
    assert surface_of(model, miller, kramers=True).z2 == (nu,)


@pytest.mark.parametrize("miller", [(0, 1, 0), (1, 0, 0), (-1, 2, 0), (-2, -1, 0)])
@pytest.mark.parametrize(
    ("model", "chern"),
    [
        (qi_wu_zhang(m=1.0), -1),
        (qi_wu_zhang(m=-1.0), 1),
        (qi_wu_zhang(m=2.5), 0),
        (haldane(m=0.1), -1),
        (haldane(m=0.1, phi=-np.pi / 2), 1),
        (haldane(m=1.0), 0),
        (hofstadter(p=1, q=3, filling=1), 1),
        (hofstadter(p=1, q=3, filling=2), -1),
    ],
    ids=["QWZ-", "QWZ+", "QWZ0", "Haldane-", "Haldane+", "Haldane0", "flux 1/3", "flux 2/3"],
)
def test_signed_edge_count_is_the_chern_number(model, chern: int, miller) -> None:
    """Hatsugai, PRL 71, 3697 (1993), doi:10.1103/PhysRevLett.71.3697.

    Magnitudes are those of the papers named with the models. The sign is that of the plaquette
    count in `topovet.invariants.chern`, which `test_published_wilson` settles."""
    found = surface_of(model, miller, kramers=False)
    assert (found.status, found.chern) == ("ok", chern)


def test_layers_of_chern_insulators_are_no_case_for_kramers() -> None:
    found = surface_of(chern_stack(), (0, 0, 1), kramers=False)
    assert found.status == "not-applicable"
