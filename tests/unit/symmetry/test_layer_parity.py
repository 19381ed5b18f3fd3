"""Homomorphisms of space groups onto numbers modulo 2, against the finite group written out."""

from __future__ import annotations

import itertools

import numpy as np
import pytest

from space_group_samples import GroupSample, sample_group
from topovet.symmetry.layer_parity import find_layer_parities

Element = tuple[int, tuple[int, int, int]]


def _product(sample: GroupSample, a: Element, b: Element) -> Element:
    """g_a {1|s} after g_b {1|t}, as an element {1|u} g with u modulo 2, written out."""
    (i, s), (j, t) = a, b
    w = sample.rotations[i] @ sample.rotations[j]
    moved = (
        sample.rotations[i] @ (sample.translations[j] + np.array(t))
        + sample.translations[i]
        + np.array(s)
    )
    c = next(c for c, r in enumerate(sample.rotations) if np.array_equal(r, w))
    x, y, z = (np.round(moved - sample.translations[c]).astype(int) % 2).tolist()
    return c, (x, y, z)


def _elements(sample: GroupSample) -> list[Element]:
    cells = list(itertools.product((0, 1), repeat=3))
    return [(i, cell) for i in range(len(sample.rotations)) for cell in cells]


@pytest.mark.parametrize("number", [2, 11, 14, 62, 81, 82, 143])
def test_each_is_a_homomorphism_and_none_is_missing(number: int) -> None:
    """Their number is the index of the subgroup that all squares generate."""
    sample = sample_group(number)
    found = find_layer_parities(sample.rotations, sample.translations)
    elements = _elements(sample)
    product = {(a, b): _product(sample, a, b) for a in elements for b in elements}
    delta = {e: found.of(e[0], e[1]) for e in elements}
    assert all(np.array_equal((delta[a] + delta[b]) % 2, delta[c]) for (a, b), c in product.items())
    squares = {product[e, e] for e in elements}
    while True:
        grown = squares | {product[a, b] for a in squares for b in squares}
        if grown == squares:
            break
        squares = grown
    assert len(found.choices) == len(elements) // len(squares)
    assert len(np.unique(found.choices, axis=0)) == len(found.choices)


@pytest.mark.parametrize(
    ("number", "weak"),
    [
        (225, {(0, 0, 0)}),  # C3 and C4 leave no half reciprocal vector of an fcc lattice
        (221, {(0, 0, 0), (1, 1, 1)}),
        (166, {(0, 0, 0), (1, 1, 1)}),
        (194, {(0, 0, 0)}),  # a screw by c/2: layers along c come in pairs
        (191, {(0, 0, 0), (0, 0, 1)}),
    ],
)
def test_weak_indices_that_a_group_can_have(number: int, weak: set[tuple[int, ...]]) -> None:
    sample = sample_group(number)
    found = find_layer_parities(sample.rotations, sample.translations)
    assert {tuple(nu) for nu in found.weak.tolist()} == weak


def test_operations_that_are_no_group() -> None:
    sample = sample_group(75)
    with pytest.raises(ValueError, match="not closed"):
        find_layer_parities(sample.rotations[:3], sample.translations[:3])
