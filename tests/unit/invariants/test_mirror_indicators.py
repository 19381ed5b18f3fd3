from __future__ import annotations

from collections.abc import Iterator

import numpy as np
import pytest

from space_group_samples import (
    FlatBloch,
    SymmetrisedBloch,
    atomic_basis,
    atomic_levels,
    orbit,
    sample_group,
)
from topovet.invariants.mirror_indicators import compute_mirror_indicators, mirror_planes
from topovet.model.crystal import Crystal
from topovet.model.plane import KPlane
from topovet.spectrum.eigen import one_blas_thread
from topovet.symmetry.irrep_names import rotation_axis
from topovet.symmetry.operators import WannierOperator, cartesian_rotation, operator_at
from topovet.symmetry.textbook_names import operation_kinds


@pytest.fixture(autouse=True)
def _one_thread() -> Iterator[None]:
    with one_blas_thread():
        yield


def _plus_chern(
    bloch: SymmetrisedBloch, mirror: WannierOperator, plane: KPlane, filling: int, n: int
) -> tuple[float, float]:
    """Chern number of the states with mirror eigenvalue +i, and the largest flux of a plaquette.

    Fukui, Hatsugai, Suzuki, J. Phys. Soc. Jpn. 74, 1674 (2005), whose connection <u|du> has the
    sign opposite to Berry's i<u|du>. NaN where the number of +i states changes on the plane.
    """
    x = np.arange(n) / n
    k = plane.k_at(np.stack(np.meshgrid(x, x, indexing="ij"), axis=-1).reshape(-1, 2))
    states = np.linalg.eigh(bloch.at(k))[1]
    occupied = states[:, :, :filling]
    inside = occupied.conj().transpose(0, 2, 1) @ operator_at(mirror, k) @ occupied
    values, vectors = np.linalg.eigh(1j * inside)  # +i lies at -1
    plus = (values < 0).sum(axis=1)
    if np.ptp(plus):
        return np.nan, np.inf
    chosen = (occupied @ vectors)[:, :, : plus[0]].reshape(n, n, bloch.n_orb, -1)

    def link(axis: int) -> np.ndarray:
        overlap = chosen.conj().swapaxes(-1, -2) @ np.roll(chosen, -1, axis)
        return np.linalg.det(overlap)

    along_x, along_y = link(0), link(1)
    flux = np.angle(along_x * np.roll(along_y, -1, 0) / (np.roll(along_x, -1, 1) * along_y))
    return -float(flux.sum()) / (2 * np.pi), float(np.abs(flux).max())


def _mirror_normal_to(
    operators: tuple[WannierOperator, ...], cell: np.ndarray, axis: tuple[float, float, float]
) -> WannierOperator:
    kinds = operation_kinds(np.array([o.rotation for o in operators]))
    return next(
        o
        for kind, o in zip(kinds, operators, strict=True)
        if kind == "m"
        and abs(rotation_axis(cartesian_rotation(o.rotation, cell)) @ np.array(axis)) > 0.999
    )


@pytest.mark.parametrize(
    ("number", "site", "order"),
    [
        (174, (0, 0, 0), 3),
        (187, (0, 0, 0), 3),
        (83, (0, 0, 0), 4),
        (84, (0, 0, 0), 4),  # 4_2: two sites, screw
        (87, (0, 0, 0), 4),  # body-centred: one plane
        (175, (0, 0, 0), 6),
        (176, (0, 0, 0.25), 6),  # 6_3: no indicator at the zone boundary
    ],
)
def test_equal_to_the_berry_flux_modulo_n(
    number: int, site: tuple[float, float, float], order: int
) -> None:
    """Random Hamiltonians with the group and time reversal; the flux knows no symmetry."""
    sample = sample_group(number)
    operators = sample.operators(atomic_basis(orbit(sample, site), 1))
    compared, values = 0, set()
    for seed in range(3):
        bloch = SymmetrisedBloch(operators, seed, hop=1.2)
        for filling in (2, 4, 6):
            for found in compute_mirror_indicators(
                bloch,
                operators,
                sample.crystal,
                filling,  # type: ignore[arg-type]
            ):
                assert found.n == order
                if found.status == "not-applicable":
                    assert (number, found.plane.name) in {
                        (176, "mirror k=1/2"),
                        (84, "mirror k=1/2"),
                    }
                    continue
                mirror = _mirror_normal_to(operators, sample.cell, found.axis_cart)
                chern, flux = _plus_chern(bloch, mirror, found.plane, filling, 30)
                if flux > 2.0:  # too coarse a mesh, or a gap that closes
                    continue
                assert found.status == "ok", found.reason
                assert (round(chern) - found.mirror_chern) % order == 0, (seed, filling)
                compared += 1
                values.add(found.mirror_chern)
    assert compared >= 4
    assert len(values) >= 3


@pytest.mark.parametrize(
    ("number", "names"),
    [
        (83, ["mirror k=0", "mirror k=1/2"]),
        (187, ["mirror k=0", "mirror k=1/2"]),
        (191, ["mirror k=0", "mirror k=1/2"]),
        (87, ["mirror k=0"]),  # body-centred: the other plane is the same one, shifted
        (225, ["mirror k=0"] * 3),  # face-centred, three axes
        (221, ["mirror k=0", "mirror k=1/2"] * 3),
        (99, []),  # no mirror normal to the axis
        (166, []),
        (81, []),
    ],
)
def test_planes(number: int, names: list[str]) -> None:
    sample = sample_group(number)
    basis = atomic_basis(orbit(sample, (0, 0, 0)), 0)
    operators = sample.operators(basis)
    flat = SymmetrisedBloch(operators, 1, hop=0.0)
    found = compute_mirror_indicators(flat, operators, sample.crystal, 1)  # type: ignore[arg-type]
    assert [f.plane.name for f in found] == names
    for f in found:
        assert f.status == "failed"  # one electron in a Kramers pair
        spanned = np.array([f.plane.across, f.plane.along]) @ sample.crystal.reciprocal
        assert np.cross(*spanned) @ np.array(f.axis_cart) > 0
        np.testing.assert_allclose(spanned @ np.array(f.axis_cart), 0, atol=1e-9)


@pytest.mark.parametrize("number", [83, 127, 174, 175, 187, 191])
def test_atomic_insulators_have_none(number: int) -> None:
    """Bands that do not depend on k have no Chern number, wherever their sites are."""
    sample = sample_group(number)
    for site in ((0.0, 0.0, 0.0), (0.5, 0.5, 0.0), (1 / 3, 2 / 3, 0.5), (0.0, 0.5, 0.5)):
        basis = atomic_basis(orbit(sample, site), 1)
        operators = sample.operators(basis)
        for states in atomic_levels(operators, basis, seed=2):
            flat = FlatBloch(np.eye(basis.n_orb) - states @ states.conj().T)
            for found in compute_mirror_indicators(
                flat,  # type: ignore[arg-type]
                operators,
                sample.crystal,
                states.shape[1],
            ):
                assert (found.status, found.mirror_chern) == ("ok", 0), found.reason
                assert found.purity == pytest.approx(1)


def test_a_layer_has_one_plane() -> None:
    """Two periodic directions: the whole zone is the mirror plane."""
    sample = sample_group(187)
    cell = np.array(sample.cell)
    crystal = Crystal(cell, (), np.zeros((0, 3)), (True, True, False))
    operators = sample.operators(atomic_basis(orbit(sample, (0, 0, 0)), 1))
    kinds = operation_kinds(sample.rotations)
    rotation, mirror = operators[kinds.index("3")], _mirror_normal_to(operators, cell, (0, 0, 1))
    planes = mirror_planes(mirror, rotation, crystal)
    assert [p.name for p in planes] == ["mirror k=0"]
    assert planes[0].across[2] == planes[0].along[2] == 0
