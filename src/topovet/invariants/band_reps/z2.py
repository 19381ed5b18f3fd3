"""Z2 indices that multiplicities at the maximal k strata fix, by the published formulas.

With inversion all of them follow from the parities that the irreps hold (Fu, Kane), with S4 alone
the strong one of a crystal, kappa_4 mod 2. Other groups fix none. A layer has one index, the
product over its four TRIM. The formulas are those of the other witnesses; what is independent is
where the eigenvalues come from: levels that passed the compatibility relations of the whole group,
not each momentum by itself.

References
----------
Fu, Kane, Phys. Rev. B 76, 045302 (2007), doi:10.1103/PhysRevB.76.045302.
Khalaf, Po, Vishwanath, Watanabe, Phys. Rev. X 8, 031070 (2018), doi:10.1103/PhysRevX.8.031070.
"""

from __future__ import annotations

import numpy as np

from topovet.arrays import ComplexArray, FloatArray, IntArray
from topovet.errors import TopovetError
from topovet.symmetry.bandreps.compatibility import arms_of
from topovet.symmetry.bandreps.indicator_group import BandRepresentations
from topovet.symmetry.bandreps.layers import Layer
from topovet.symmetry.little_group import same_point
from topovet.symmetry.trim import trim_points

Z2 = tuple[int | None, ...]
"""(nu0, nu1, nu2, nu3) of a crystal, one entry for a layer; None where not fixed."""

NOTHING: Z2 = (None, None, None, None)


class ContradictionError(TopovetError):
    """Two formulas for the same index differ: the multiplicities are not those of gapped bands."""


def nothing_known(found: BandRepresentations) -> Z2:
    """As many entries as the group has indices, all None."""
    return NOTHING if found.layer is None else (None,)


def z2_from_levels(found: BandRepresentations, vector: IntArray) -> Z2:
    """(nu0, nu1, nu2, nu3), or (nu,) of a layer; None at an index that the group does not fix.

    Parameters
    ----------
    found
        Band representations of a group with spin and time reversal; without, nothing is fixed.
    vector
        (n_column,) multiplicities of gapped bands.

    Raises
    ------
    ContradictionError
        S4 and inversion, or two S4 axes, do not agree.
    """
    group = found.group
    if not (group.spinful and group.time_reversal):
        return nothing_known(found)
    traces = _Traces(found, vector)
    centres = np.flatnonzero(np.all(group.rotations == -np.eye(3, dtype=np.int64), axis=(1, 2)))
    if found.layer is not None:
        return _of_layer(traces, int(centres[0]), found.layer) if len(centres) else (None,)
    strong = {_strong_from_s4(traces, w, g) for g, w in enumerate(group.rotations) if _is_s4(w)}
    z2: Z2 = NOTHING
    if len(centres):
        z2 = _from_parities(traces, int(centres[0]))
        strong.add(z2[0] or 0)
    if len(strong) > 1:
        raise ContradictionError("S4 eigenvalues and parities give different strong indices")
    if strong and not len(centres):
        return (strong.pop(), None, None, None)
    return z2


class _Traces:
    """Traces of operations among the bands, at all images of the maximal strata."""

    def __init__(self, found: BandRepresentations, vector: IntArray) -> None:
        self._points: list[FloatArray] = []
        self._traces: list[ComplexArray] = []
        for i, arm in arms_of(found.group, found.zone, found.strata, found.tables):
            part = vector[found.starts[i] : found.starts[i + 1]]
            self._points.append(np.asarray(arm.point / found.zone.denominator))
            self._traces.append(arm.traces @ part)
        self.n_bands = round(
            float(found.column_dimensions[: found.starts[1]] @ vector[: found.starts[1]])
        )

    def at(self, k: FloatArray, operation: int) -> float:
        """Trace of an operation that fixes an isolated k; real with Kramers pairs."""
        place = next(i for i, point in enumerate(self._points) if same_point(point, k))
        return float(self._traces[place][operation].real)

    def fixed_by(self, rotation: IntArray) -> list[FloatArray]:
        """The k that an operation leaves where they are."""
        inverse = np.round(np.linalg.inv(rotation.astype(float)))
        return [k for k in self._points if same_point(k @ inverse, k)]


def _is_s4(rotation: IntArray) -> bool:
    """A turn by 90 degrees followed by inversion."""
    return bool(np.trace(rotation) == -1 and round(float(np.linalg.det(rotation))) == -1)


def _strong_from_s4(traces: _Traces, rotation: IntArray, operation: int) -> int:
    """kappa_4 mod 2, kappa_4 = sum of traces over the four momenta / (2 sqrt 2)."""
    momenta = traces.fixed_by(rotation)
    kappa = sum(traces.at(k, operation) for k in momenta) / (2 * np.sqrt(2))
    if len(momenta) != 4 or abs(kappa - round(kappa)) > 1e-6:
        raise ContradictionError("the S4 eigenvalues give no whole number")
    return round(float(kappa)) % 2


def _from_parities(traces: _Traces, inversion: int) -> Z2:
    """Products of parities, one of each Kramers pair, over all TRIM and over k_i = 1/2."""
    trim = trim_points((True, True, True))
    pairs = _odd_pairs(traces, inversion, trim)
    weak = [int(pairs[trim[:, i] > 0.25].sum()) % 2 for i in range(3)]
    return (int(pairs.sum()) % 2, weak[0], weak[1], weak[2])


def _of_layer(traces: _Traces, inversion: int, layer: Layer) -> Z2:
    """Product of parities over the four TRIM of the plane."""
    return (int(_odd_pairs(traces, inversion, trim_points(layer.periodic)).sum()) % 2,)


def _odd_pairs(traces: _Traces, inversion: int, trim: FloatArray) -> IntArray:
    """Odd Kramers pairs at each TRIM."""
    odd = np.array([(traces.n_bands - traces.at(k, inversion)) / 2 for k in trim])
    pairs = np.round(odd / 2).astype(np.int64)
    if np.abs(2 * pairs - odd).max() > 1e-6:
        raise ContradictionError("odd states do not come in Kramers pairs")
    return pairs
