"""H along a line as blocks, against irreps sorted out anew at each k."""

from __future__ import annotations

import numpy as np
import pytest

from space_group_samples import GroupSample, SymmetrisedBloch, atomic_basis, orbit, sample_group
from topovet.arrays import ComplexArray, FloatArray
from topovet.symmetry.bandreps.double_group import DoubleGroup, build_double_group
from topovet.symmetry.bandreps.line_blocks import LineBlocks, LineError, find_line, split_line
from topovet.symmetry.operators import WannierOperator, operator_at


class Detuned:
    """Some H(k) and a constant more, (n_orb, n_orb) eV."""

    def __init__(self, bloch: SymmetrisedBloch, more: ComplexArray) -> None:
        self._bloch, self._more = bloch, more

    def at(self, k_frac: FloatArray) -> ComplexArray:
        return self._bloch.at(k_frac) + self._more


def _case(
    number: int, site: list[float], l_max: int = 1
) -> tuple[GroupSample, DoubleGroup, tuple[WannierOperator, ...], SymmetrisedBloch]:
    sample = sample_group(number)
    operators = sample.operators(atomic_basis(orbit(sample, site), l_max))
    group = build_double_group(sample.cell, sample.rotations, sample.translations, spinful=True)
    return sample, group, operators, SymmetrisedBloch(operators, 5, hop=0.4)


def _sorted_anew(
    blocks: LineBlocks,
    group: DoubleGroup,
    operators: tuple[WannierOperator, ...],
    h: ComplexArray,
    k: FloatArray,
) -> list[FloatArray]:
    """Energies of each kind at one k: projectors with characters that carry exp(-2 pi i k.w)."""
    table, members = blocks.line.table, blocks.line.table.group.members
    phases = np.exp(-2j * np.pi * (group.translations[members] @ (k - table.group.k_frac)))
    matrices = np.array([operator_at(operators[g], k[None])[0] for g in members])
    energies, states = np.linalg.eigh(h)
    found = []
    for corep in table.coreps:
        chosen = [table.irreps[i] for i in corep.irreps]
        weights = sum(i.dimension * (i.characters * phases).conj() for i in chosen) / len(members)
        projector = np.tensordot(weights, matrices, axes=1)
        shares = np.einsum("in,ij,jn->n", states.conj(), projector, states).real
        found.append(energies[shares > 0.5][:: corep.dimension])
    return found


@pytest.mark.parametrize(
    ("number", "site", "ends"),
    [
        (216, [0.0, 0.0, 0.0], ([0, 0, 0], [0, 0, 0.5])),  # three kinds on a threefold axis
        (136, [0.0, 0.0, 0.0], ([0, 0, 0], [0, 0, 0.5])),  # a screw of order 4
        (36, [0.1, 0.1, 0.2], ([0, 0, 0], [0, 0, 0.5])),  # a screw and a glide, no inversion
        (14, [0.1, 0.2, 0.3], ([0.5, 0, 0], [0.5, 0.5, 0])),  # a screw along the line
    ],
)
def test_energies_of_each_kind(
    number: int, site: list[float], ends: tuple[list[float], list[float]]
) -> None:
    _, group, operators, bloch = _case(number, site)
    blocks = split_line(group, find_line(group, *np.array(ends, dtype=float)), operators)
    s = np.array([0.17, 0.62, 0.93])
    found, h = blocks.energies(bloch, s), bloch.at(blocks.line.at(s))
    for i, k in enumerate(blocks.line.at(s)):
        expected = _sorted_anew(blocks, group, operators, h[i], k)
        for kind, energies in zip(found, expected, strict=True):
            assert np.abs(np.sort(energies) - kind[i]).max(initial=0.0) < 1e-9
    assert blocks.residual_ev(bloch, s) < 1e-9


def test_what_breaks_the_symmetry_is_measured() -> None:
    """The residual bounds how far levels lie off those of H (Weyl)."""
    _, group, operators, bloch = _case(216, [0.0, 0.0, 0.0])
    line = find_line(group, np.zeros(3), np.array([0, 0, 0.5]))
    blocks, s = split_line(group, line, operators), np.linspace(0, 1, 5)
    rng = np.random.default_rng(2)
    more = rng.standard_normal((bloch.n_orb, bloch.n_orb)) * 0.03
    detuned = Detuned(bloch, more + more.T)
    residual = blocks.residual_ev(detuned, s)
    repeated = [
        np.repeat(e, c.dimension, axis=1)
        for e, c in zip(blocks.energies(detuned, s), line.table.coreps, strict=True)
    ]
    apart = np.sort(np.concatenate(repeated, axis=1)) - np.linalg.eigvalsh(detuned.at(line.at(s)))
    assert 1e-4 < np.abs(apart).max() < residual


def test_ends_with_few_digits_are_put_on_the_line() -> None:
    group = _case(216, [0.0, 0.0, 0.0])[1]
    line = find_line(group, np.zeros(3), np.array([0.00002, -0.00003, 0.50003]))
    assert len(line.table.group.members) == 6
    assert np.abs(line.k_end[:2]).max() < 1e-12
    assert len(find_line(group, np.zeros(3), np.array([0.01, 0.03, 0.5])).table.group.members) == 1


def test_operators_of_another_basis_are_refused() -> None:
    _, group, operators, _ = _case(216, [0.0, 0.0, 0.0])
    line = find_line(group, np.zeros(3), np.array([0, 0, 0.5]))
    shuffled = (operators[0], *operators[2:24], operators[1])
    with pytest.raises(LineError):
        split_line(group, line, shuffled)
