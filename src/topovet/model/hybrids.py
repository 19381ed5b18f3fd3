"""Expansion of declared angular functions, hybrids included, in the 16 real harmonics.

The hybrids are those of the table in the Wannier90 user guide, quoted from memory: sp along x, sp2
in the xy plane with its third member along +x, sp3 along (1,1,1) and its tetrahedron, sp3d a
trigonal bipyramid, sp3d2 an octahedron. Each set is orthonormal.
"""

from __future__ import annotations

from math import sqrt

import numpy as np

from topovet.arrays import FloatArray
from topovet.model.real_harmonics import HARMONIC_L, N_HARMONICS

_S, _PZ, _PX, _PY, _DZ2, _DX2_Y2 = 0, 1, 2, 3, 4, 7

_SP2 = (
    {_S: 1 / sqrt(3), _PX: -1 / sqrt(6), _PY: 1 / sqrt(2)},
    {_S: 1 / sqrt(3), _PX: -1 / sqrt(6), _PY: -1 / sqrt(2)},
    {_S: 1 / sqrt(3), _PX: 2 / sqrt(6)},
)

HYBRIDS = {
    -1: (
        {_S: 1 / sqrt(2), _PX: 1 / sqrt(2)},
        {_S: 1 / sqrt(2), _PX: -1 / sqrt(2)},
    ),
    -2: _SP2,
    -3: (
        {_S: 0.5, _PX: 0.5, _PY: 0.5, _PZ: 0.5},
        {_S: 0.5, _PX: 0.5, _PY: -0.5, _PZ: -0.5},
        {_S: 0.5, _PX: -0.5, _PY: 0.5, _PZ: -0.5},
        {_S: 0.5, _PX: -0.5, _PY: -0.5, _PZ: 0.5},
    ),
    -4: (
        *_SP2,
        {_PZ: 1 / sqrt(2), _DZ2: 1 / sqrt(2)},
        {_PZ: -1 / sqrt(2), _DZ2: 1 / sqrt(2)},
    ),
    -5: (
        {_S: 1 / sqrt(6), _PX: -1 / sqrt(2), _DZ2: -1 / sqrt(12), _DX2_Y2: 0.5},
        {_S: 1 / sqrt(6), _PX: 1 / sqrt(2), _DZ2: -1 / sqrt(12), _DX2_Y2: 0.5},
        {_S: 1 / sqrt(6), _PY: -1 / sqrt(2), _DZ2: -1 / sqrt(12), _DX2_Y2: -0.5},
        {_S: 1 / sqrt(6), _PY: 1 / sqrt(2), _DZ2: -1 / sqrt(12), _DX2_Y2: -0.5},
        {_S: 1 / sqrt(6), _PZ: -1 / sqrt(2), _DZ2: 1 / sqrt(3)},
        {_S: 1 / sqrt(6), _PZ: 1 / sqrt(2), _DZ2: 1 / sqrt(3)},
    ),
}
"""l = -1..-5 -> coefficients of each member mr = 1, 2, …, by index of the harmonic."""


def harmonic_coefficients(l: int, mr: int) -> FloatArray:
    """The function with Wannier90's numbers l and mr, in its own local axes.

    Parameters
    ----------
    l
        0..3 for s..f, -1..-5 for sp, sp2, sp3, sp3d, sp3d2.
    mr
        Member of the set, from 1.

    Returns
    -------
    FloatArray
        (16,) coefficients of the real harmonics; norm 1.
    """
    coefficients = np.zeros(N_HARMONICS)
    if l < 0:
        for harmonic, value in HYBRIDS[l][mr - 1].items():
            coefficients[harmonic] = value
    else:
        coefficients[np.flatnonzero(l == HARMONIC_L)[mr - 1]] = 1.0
    return coefficients
