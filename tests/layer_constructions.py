"""Crystals made of two-dimensional topological layers that do not see each other.

Bernevig, Hughes and Zhang's layer (`lattice_models.bhz`) is turned and put where wanted; copies at
different sites are not coupled. All invariants of such a stack can be counted by eye: that is
what makes it a check of formulas (Song, Zhang, Fang, Fang, Nat. Commun. 9, 3530 (2018)).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from lattice_models import HARMONICS, LatticeModel, bhz, build_basis
from topovet.arrays import ComplexArray, FloatArray, IntArray
from topovet.model.crystal import Crystal
from topovet.symmetry.operators import build_operator

CONVENTIONAL = 5.0 * np.eye(3)
TURNS: dict[str, IntArray] = {
    "z": np.eye(3, dtype=np.int64),
    "x": np.array([[0, 0, 1], [1, 0, 0], [0, 1, 0]]),  # z -> x
    "y": np.array([[0, 1, 0], [0, 0, 1], [1, 0, 0]]),  # z -> y
}
"""Turns of the layer in the xy plane to one with this normal."""


@dataclass(frozen=True, slots=True)
class Layer:
    """A layer through a site (conventional axes) with a normal; trivial for m > 4."""

    site: tuple[float, float, float]
    normal: str = "z"
    m: float = 1.5


def layered(
    layers: Sequence[Layer], primitive: Sequence[Sequence[float]] = np.eye(3).tolist()
) -> LatticeModel:
    """One site and layer for each entry, repeated by the lattice with these vectors."""
    vectors = np.array(primitive, dtype=float)
    parts = [_part(layer, vectors) for layer in layers]
    n = parts[0][1].shape[-1]
    cells = sorted({tuple(r) for r_cells, _ in parts for r in r_cells.tolist()})
    h_r = np.zeros((len(cells), n * len(parts), n * len(parts)), dtype=complex)
    for i, (r_cells, blocks) in enumerate(parts):
        here = slice(n * i, n * (i + 1))
        for r, block in zip(r_cells.tolist(), blocks, strict=True):
            h_r[cells.index(tuple(r)), here, here] += block
    sites = np.array([layer.site for layer in layers]) @ np.linalg.inv(vectors)
    basis = build_basis(
        [(f"A{i}", site, name) for i, site in enumerate(sites) for name in HARMONICS]
    )
    crystal = Crystal(vectors @ CONVENTIONAL, ("A",) * len(sites), sites)
    return LatticeModel(
        "layers", crystal, basis, np.array(cells), h_r, 2 * len(parts), True, (0.0, 0.0, 0.0)
    )


def _part(layer: Layer, vectors: FloatArray) -> tuple[IntArray, ComplexArray]:
    """R in the lattice of `vectors` and blocks of one layer, both turned.

    The layer's s, px, py and, far above, pz, so that turns stay within the functions.
    """
    flat = bhz(m=layer.m)
    among = np.array([0, 1, 4, 5, 6, 7])  # s, px, py in s, pz, px, py
    blocks = np.zeros((len(flat.h_r), 8, 8), dtype=complex)
    blocks[:, among[:, None], among] = flat.h_r
    home = np.flatnonzero(~flat.r_cells.any(axis=1))[0]
    blocks[home, [2, 3], [2, 3]] = 30.0
    basis = build_basis([("A", np.zeros(3), name) for name in HARMONICS])
    turn = TURNS[layer.normal]
    d = build_operator(basis, Crystal(CONVENTIONAL, ("A",), np.zeros((1, 3))), turn, np.zeros(3))
    r_cells = np.round(flat.r_cells @ turn.T @ np.linalg.inv(vectors)).astype(np.int64)
    return r_cells, d.matrix @ blocks @ d.matrix.conj().T
