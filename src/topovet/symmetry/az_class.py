"""Altland-Zirnbauer class of a Hamiltonian, and the invariants that its class can have.

Time reversal Theta is given (tested elsewhere). What is searched on H besides it:

- Sublattice (chiral) symmetry S H(k) S^-1 = -H(k) about the mean energy E_0 = tr H(R=0) / n_orb, as
  a diagonal S of +1 and -1: a colouring of the Wannier functions such that H - E_0 couples only
  different colours, on-site energies included. Colours are found along a maximum spanning tree of
  the hoppings and tested on all of H.
- Particle-hole symmetry as the product of such an S with Theta, (S Theta)^2 = Theta^2 where S is
  the same for both spins of an orbital, -Theta^2 where it is opposite. An S that is the one in some
  uncoupled parts of H and the other in others fixes no class and is left out.
- A necessary condition for any such symmetry, however it mixes functions: at every k the spectrum
  is its own mirror image about E_0 (sublattice), or that of -k is (particle-hole).

Not searched: S or particle-hole operators that mix functions or that exist alone. Where the spectra
pair up and no S was found the class is that of time reversal alone, and `excluded` is false.

The class belongs to blocks that no unitary symmetry splits further. Full spin rotation is taken
into account (without spin-orbit coupling each spin block counts, Theta^2 = +1); other symmetries
are not: crystalline ones, and a conserved spin component.

References
----------
Altland, Zirnbauer, PRB 55, 1142 (1997), doi:10.1103/PhysRevB.55.1142; Schnyder, Ryu, Furusaki,
Ludwig, PRB 78, 195125 (2008), doi:10.1103/PhysRevB.78.195125, tables I and II; Kitaev, AIP Conf.
Proc. 1134, 22 (2009), doi:10.1063/1.3149495. The table below is quoted from memory; 2Z marks
integers that are always even.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.sparse import csr_array
from scipy.sparse.csgraph import breadth_first_order, connected_components, minimum_spanning_tree

from topovet.arrays import ComplexArray, FloatArray, IntArray, largest_spectral_norm
from topovet.model.fourier import BlochSum
from topovet.model.hamiltonian import TightBindingModel
from topovet.notation import mev
from topovet.symmetry.results import TimeReversalTest
from topovet.symmetry.time_reversal import sampled_k
from topovet.units import MEV_PER_EV

TOLERANCE_MEV = 1.0
"""Largest violation with which a symmetry counts as present; that of time reversal."""

SPIN_FREE_MEV = 0.1
"""Spin-dependent terms below this count as no spin-orbit coupling."""

CLASSES = {
    # Theta^2, particle-hole squared, sublattice: name, strong invariants in 1, 2, 3 dimensions
    (0, 0, 0): ("A", ("0", "Z", "0")),
    (0, 0, 1): ("AIII", ("Z", "0", "Z")),
    (1, 0, 0): ("AI", ("0", "0", "0")),
    (1, 1, 1): ("BDI", ("Z", "0", "0")),
    (0, 1, 0): ("D", ("Z2", "Z", "0")),
    (-1, 1, 1): ("DIII", ("Z2", "Z2", "Z")),
    (-1, 0, 0): ("AII", ("0", "Z2", "Z2")),
    (-1, -1, 1): ("CII", ("2Z", "0", "Z2")),
    (0, -1, 0): ("C", ("0", "2Z", "0")),
    (1, -1, 1): ("CI", ("0", "0", "2Z")),
}


@dataclass(frozen=True, slots=True)
class AzClass:
    """Symmetry class of a Hamiltonian.

    Attributes
    ----------
    name
        A, AIII, AI, BDI, D, DIII, AII, CII, C or CI.
    time_reversal, particle_hole
        +1 or -1, the square of the operator; 0 where it is absent.
    sublattice
        1 or 0.
    dimension
        1 to 3.
    strong
        Group of the strong invariant: "0", "Z", "Z2" or "2Z".
    weak
        Group of the invariants of lines and planes, those of the lower dimensions, from d - 1 down.
    sublattice_mev
        Spectral norm of S H(k) S + H(k) about the mean energy for the best colouring, largest over
        sampled k.
    pairing_mev, reversed_pairing_mev
        Largest |E_n(k) + E_m(k') - 2 E_0| of the n-th lowest and m-th highest level, with k' = k
        and k' = -k.
    excluded
        Both pairings exceed the tolerance: no sublattice or particle-hole symmetry of any kind.
    colours
        (n_orb,) +1 or -1 for each function where the sublattice symmetry is there, else empty.
    spin_free
        Whether the class is that of one spin block, for want of spin-orbit coupling.
    mean_energy_ev
        E_0.
    tolerance_mev
        Largest violation with which a symmetry counts as present.
    """

    name: str
    time_reversal: int
    particle_hole: int
    sublattice: int
    dimension: int
    strong: str
    weak: tuple[str, ...]
    sublattice_mev: float
    pairing_mev: float
    reversed_pairing_mev: float
    excluded: bool
    colours: tuple[int, ...]
    spin_free: bool
    mean_energy_ev: float
    tolerance_mev: float

    @property
    def sentence(self) -> str:
        """The class and what can exist in it, in plain words."""
        block = " of each spin block" if self.spin_free else ""
        return (
            f"Class {self.name}{block} in {self.dimension} "
            f"dimension{'s' if self.dimension > 1 else ''}: {self._squares()}. "
            f"{self._invariants()} {self._others()}"
        )

    def _squares(self) -> str:
        names = {1: "squares to +1", -1: "squares to −1", 0: "is absent"}
        text = f"time reversal {names[self.time_reversal]}"
        if self.sublattice:
            text += f", sublattice symmetry holds to {mev(self.sublattice_mev)}"
            if self.particle_hole:
                text += f", particle-hole symmetry {names[self.particle_hole]}"
        return text

    def _invariants(self) -> str:
        groups = {"Z": "an integer", "2Z": "an even integer", "Z2": "a Z2 index"}
        strong = groups.get(self.strong)
        weak = [groups[g] for g in self.weak if g in groups]
        if strong is None and not weak:
            return "No strong or weak index can be nontrivial; crystalline ones are another matter."
        text = f"Strong invariant: {strong or 'none'}"
        return text + (f"; of lower-dimensional sections: {', '.join(weak)}." if weak else ".")

    def _others(self) -> str:
        if self.sublattice:
            return "Colours of the sublattices were read off the hoppings."
        if self.excluded:
            least = min(self.pairing_mev, self.reversed_pairing_mev)
            return (
                "No sublattice or particle-hole symmetry of any kind: the spectrum misses its "
                f"mirror image by {mev(least)}."
            )
        return (
            "No sublattice symmetry was found that is diagonal in the Wannier functions and goes "
            "with time reversal; the spectrum is its own mirror image, so that one that mixes "
            "functions is not excluded."
        )


def find_az_class(
    model: TightBindingModel,
    bloch: BlochSum,
    time_reversal: TimeReversalTest,
    periodic: tuple[bool, bool, bool],
) -> AzClass:
    """Symmetry class of a Hamiltonian whose time reversal has been tested.

    Parameters
    ----------
    model, bloch
        The same Hamiltonian in real space and as a Fourier sum; spinors interlaced.
    time_reversal
        Its test.
    periodic
        Periodic directions; their number is the dimension.
    """
    k_frac = sampled_k(periodic)
    mixing = time_reversal.spin_mixing_mev
    spin_free = model.spinful and mixing is not None and mixing <= SPIN_FREE_MEV
    block = slice(None, None, 2) if spin_free else slice(None)
    h_r = model.h_r[:, block, block]
    h_k, h_minus = bloch.at(k_frac)[:, block, block], bloch.at(-k_frac)[:, block, block]
    n_orb = h_r.shape[1]
    mean_ev = float(np.trace(h_r[model.n_r // 2]).real) / n_orb if model.n_r % 2 else 0.0
    spinor = model.spinful and not spin_free
    square = 0 if not time_reversal.present else -1 if spinor else 1
    partner = np.arange(n_orb) ^ 1 if spinor and n_orb % 2 == 0 else np.arange(n_orb)
    colours = _colour(np.abs(h_r).max(axis=0), partner)
    off = h_k - mean_ev * np.eye(n_orb)
    same_colour = np.where(colours[:, None] == colours, 2 * off, 0.0)  # S H S + H
    violation = MEV_PER_EV * largest_spectral_norm(same_colour)
    commutes = _one_sign(colours * colours[partner])
    found = violation <= TOLERANCE_MEV and (square == 0 or commutes != 0)
    key = (square, square * commutes if found else 0, int(found))
    pairing, reversed_pairing = _pairings_mev(h_k, h_minus, mean_ev)
    name, strong = CLASSES[key]
    dimension = sum(periodic)
    return AzClass(
        name=name,
        time_reversal=key[0],
        particle_hole=key[1],
        sublattice=key[2],
        dimension=dimension,
        strong=strong[dimension - 1],
        weak=strong[: dimension - 1][::-1],
        sublattice_mev=violation,
        pairing_mev=pairing,
        reversed_pairing_mev=reversed_pairing,
        excluded=min(pairing, reversed_pairing) > TOLERANCE_MEV,
        colours=tuple(colours.tolist()) if found else (),
        spin_free=spin_free,
        mean_energy_ev=mean_ev,
        tolerance_mev=TOLERANCE_MEV,
    )


def _colour(strength: FloatArray, partner: IntArray) -> IntArray:
    """(n_orb,) +1 or -1, neighbours on a maximum spanning tree of the hoppings different.

    Each coupled set is coloured on its own; one whose time-reversal partner is another set takes
    over the partner's colours, the first function of any other is +1.
    """
    linked = np.where(strength > TOLERANCE_MEV / MEV_PER_EV, strength, 0.0)
    np.fill_diagonal(linked, 0.0)
    tree = minimum_spanning_tree(csr_array(-np.maximum(linked, linked.T)))
    n_sets, label = connected_components(tree, directed=False)
    colours = np.zeros(len(linked), dtype=np.int64)
    for one in range(n_sets):
        root = int(np.flatnonzero(label == one)[0])
        order, before = breadth_first_order(tree, root, directed=False)
        colours[root] = colours[partner[root]] or 1
        for i in order[1:]:
            colours[i] = -colours[before[i]]
    return colours


def _one_sign(signs: IntArray) -> int:
    """The common sign of all entries, 0 where they differ."""
    return int(signs[0]) if np.all(signs == signs[0]) else 0


def _pairings_mev(h_k: ComplexArray, h_minus: ComplexArray, mean_ev: float) -> tuple[float, float]:
    """How far the levels at k are from the mirror image of those at k, and of those at -k."""
    energies, reversed_energies = (np.linalg.eigvalsh(h) - mean_ev for h in (h_k, h_minus))
    same = float(np.abs(energies + energies[:, ::-1]).max())
    across = float(np.abs(energies + reversed_energies[:, ::-1]).max())
    return MEV_PER_EV * same, MEV_PER_EV * across
