"""The cell re-cut along Miller indices, in exact integer arithmetic.

A surface (h k l) of the lattice a_1, a_2, a_3 is spanned by the lattice vectors R with n.R = h R_1
+ k R_2 + l R_3 = 0, and n.R counts the lattice plane that R lies on. The re-cut cell has a'_1 and
a'_2 in the plane and a'_3 one plane up, so that the third component of R in it is n.R. Miller
indices refer to the Hamiltonian's own cell, primitive as it may be: the layers of rhombohedral
Bi2Se3, (001) in its hexagonal setting, are (111) here."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from topovet.arrays import FloatArray, IntArray, frozen
from topovet.errors import UndefinedError
from topovet.model.crystal import Crystal
from topovet.model.hamiltonian import TightBindingModel, build_model

Miller = tuple[int, int, int]


@dataclass(frozen=True, slots=True, eq=False)
class Recut:
    """A cell whose first two vectors lie in the surface.

    Attributes
    ----------
    miller
        Indices without a common divisor; the half-crystal "upper" has its matter on the side that
        they point to.
    matrix
        (3, 3) integers of determinant +1; row i is a'_i in units of the old lattice vectors.
    cell
        (3, 3) angstrom, a'_i as rows.
    spacing_ang
        Distance of neighbouring lattice planes.
    normal_cart
        (3,) unit vector along h b_1 + k b_2 + l b_3.
    axes
        Which of a'_1 and a'_2 are periodic; (0,) in two dimensions, where a'_2 is the vacuum.
    """

    miller: Miller
    matrix: IntArray
    cell: FloatArray
    spacing_ang: float
    normal_cart: FloatArray
    axes: tuple[int, ...]

    def __post_init__(self) -> None:
        for name in ("matrix", "cell", "normal_cart"):
            object.__setattr__(self, name, frozen(getattr(self, name)))

    def in_cell(self, positions_frac: FloatArray) -> FloatArray:
        """(n, 3) components along a'_1, a'_2, a'_3 of positions in the old cell."""
        return np.asarray(positions_frac @ integer_inverse(self.matrix))

    @property
    def reciprocal(self) -> FloatArray:
        """(2, 2) or (1, 1): reciprocal vectors of the surface lattice in an orthonormal frame.

        Rows, 1/angstrom, 2 pi included.
        """
        metric = self.cell[list(self.axes)] @ self.cell[list(self.axes)].T
        return np.asarray(2 * np.pi * np.linalg.inv(np.linalg.cholesky(metric)).T)


def recut(crystal: Crystal, miller: Miller) -> Recut:
    """The re-cut cell of a surface, of an edge in two dimensions.

    Parameters
    ----------
    crystal
        Cell and periodic directions of the Hamiltonian.
    miller
        Any integers but (0, 0, 0); a common divisor is taken out. In two dimensions the entry of
        the direction that is not periodic must be 0, and the edge runs along the lattice vector
        normal to the other two: (0, 1, 0) along a_1.

    Raises
    ------
    UndefinedError
        The indices name no surface of this crystal.
    """
    normal = _primitive(miller, crystal.periodic)
    cell = np.asarray(crystal.cell)
    axes: tuple[int, ...] = (0,) if crystal.dimension == 2 else (0, 1)
    if crystal.dimension == 2:
        matrix = _edge_rows(normal, crystal.periodic)
    else:
        matrix = [*_reduced(_plane_rows(normal), cell), _one_plane_up(normal)]
    matrix[2] = _uprighted(matrix, axes, cell)
    rows = np.array(matrix, dtype=np.int64)
    if _determinant(matrix) < 0:
        rows[0] = -rows[0]
    g_cart = np.array(normal) @ np.linalg.inv(cell).T
    length = float(np.linalg.norm(g_cart))
    return Recut(normal, rows, rows @ cell, 1 / length, g_cart / length, axes)


def recut_model(
    model: TightBindingModel, cut: Recut, layer_of: IntArray | None = None
) -> TightBindingModel:
    """H(R) in the re-cut cell, each Wannier function counted to the layer it is wanted in.

    Parameters
    ----------
    model
        Closed under R -> -R.
    cut
        The new cell; its matrix is inverted exactly.
    layer_of
        (n_orb,) lattice plane, of those of a'_3, that function m of the home cell belongs to; all
        0 by default. Function m at R is then in layer n.R + layer_of[m], which moves the cut
        between atoms without touching the bulk spectrum.

    Returns
    -------
    TightBindingModel
        Rows of r_cells are components along a'_1, a'_2, a'_3.
    """
    r_new = np.asarray(model.r_cells @ integer_inverse(cut.matrix))
    if layer_of is None or not np.any(layer_of != layer_of[0]):
        return build_model(r_new, np.asarray(model.h_r), spinful=model.spinful)
    step = np.asarray(layer_of)[None, :] - np.asarray(layer_of)[:, None]
    r_parts, h_parts = [], []
    for d in np.unique(step):
        h = np.where(step == d, model.h_r, 0.0)
        kept = np.flatnonzero(h.any(axis=(1, 2)))
        r_parts.append(r_new[kept] + np.array([0, 0, d]))
        h_parts.append(h[kept])
    return build_model(
        np.concatenate(r_parts), np.concatenate(h_parts), spinful=model.spinful, consume=True
    )


def _primitive(miller: Miller, periodic: tuple[bool, bool, bool]) -> Miller:
    h, k, l = (int(c) for c in miller)
    divisor = math.gcd(h, k, l)
    shown = f"({h} {k} {l})"
    if divisor == 0:
        raise UndefinedError(f"surface {shown}: Miller indices must not all be 0; give others.")
    vacuum = [i for i, is_periodic in enumerate(periodic) if not is_periodic]
    if len(vacuum) > 1:
        raise UndefinedError("a crystal with one periodic direction has no edges of this kind.")
    if any((h, k, l)[i] for i in vacuum):
        raise UndefinedError(
            f"edge {shown}: direction {vacuum[0] + 1} is not periodic, so that its index must be 0."
        )
    return h // divisor, k // divisor, l // divisor


def _bezout(a: int, b: int) -> tuple[int, int, int]:
    """(g, x, y) with x a + y b = g = gcd(a, b) >= 0."""
    x0, y0, x1, y1 = 1, 0, 0, 1
    while b:
        q = a // b
        a, b = b, a - q * b
        x0, x1 = x1, x0 - q * x1
        y0, y1 = y1, y0 - q * y1
    return (a, x0, y0) if a >= 0 else (-a, -x0, -y0)


def _plane_rows(normal: Miller) -> list[list[int]]:
    """Two vectors that span the integer vectors normal to (h, k, l)."""
    h, k, l = normal
    g, x, y = _bezout(h, k)
    if g == 0:
        return [[1, 0, 0], [0, 1, 0]]
    # the first spans n.R = 0 with R_3 = 0; the second has the least R_3 that g divides: g itself
    return [[k // g, -h // g, 0], [-x * l, -y * l, g]]


def _one_plane_up(normal: Miller) -> list[int]:
    """A vector with n.R = 1."""
    h, k, l = normal
    g, x, y = _bezout(h, k)
    _, u, v = _bezout(g, l)
    return [u * x, u * y, v]


def _edge_rows(normal: Miller, periodic: tuple[bool, bool, bool]) -> list[list[int]]:
    """Along the edge, along the vacuum, one row of cells further in."""
    vacuum = periodic.index(False)
    i, j = (axis for axis in range(3) if axis != vacuum)
    _, x, y = _bezout(normal[i], normal[j])
    along, out, up = [0, 0, 0], [0, 0, 0], [0, 0, 0]
    along[i], along[j] = normal[j], -normal[i]
    out[vacuum] = 1
    up[i], up[j] = x, y
    return [along, out, up]


def _reduced(rows: list[list[int]], cell: FloatArray) -> list[list[int]]:
    """The shortest basis of the plane lattice (Lagrange-Gauss); integers throughout."""
    a, b = np.array(rows[0]), np.array(rows[1])
    while True:
        if np.linalg.norm(a @ cell) > np.linalg.norm(b @ cell):
            a, b = b, a
        a_cart = a @ cell
        turns = round(float((b @ cell) @ a_cart / (a_cart @ a_cart)))
        shorter = b - turns * a
        # a strictly shorter vector, or rounding could exchange equal ones for ever
        if turns == 0 or np.linalg.norm(shorter @ cell) > (1 - 1e-9) * np.linalg.norm(b @ cell):
            return [a.tolist(), b.tolist()]
        b = shorter


def _uprighted(rows: list[list[int]], axes: tuple[int, ...], cell: FloatArray) -> list[int]:
    """a'_3 moved by in-plane lattice vectors so that it leans least, up to rounding."""
    in_plane = np.array([rows[i] for i in axes]) @ cell
    lean = np.linalg.lstsq(in_plane.T, np.array(rows[2]) @ cell, rcond=None)[0]
    turns = [round(float(c) - 1e-9) for c in lean]
    return [
        int(c - sum(t * rows[i][axis] for t, i in zip(turns, axes, strict=True)))
        for axis, c in enumerate(rows[2])
    ]


def _determinant(m: list[list[int]]) -> int:
    (a, b, c), (d, e, f), (g, h, i) = m
    return a * (e * i - f * h) - b * (d * i - f * g) + c * (d * h - e * g)


def integer_inverse(matrix: IntArray) -> IntArray:
    """Inverse of an integer matrix of determinant 1, by its adjugate."""
    a, b, c = matrix
    return np.stack([np.cross(b, c), np.cross(c, a), np.cross(a, b)], axis=1)
