"""What the spectrum step finds."""

from __future__ import annotations

from dataclasses import dataclass

from topovet.arrays import FloatArray


@dataclass(frozen=True, slots=True)
class Electrons:
    """The filling, and how it came about.

    Attributes
    ----------
    filling
        Occupied Wannier bands, spin counted.
    source
        "command line", "case.toml", "NAME.win", or the name of a list of cases.
    how
        One sentence for people.
    fermi_ev
        The Fermi energy that was given, if any.
    mean_count
        Mean number of bands below fermi_ev over the mesh; None without a Fermi energy.
    least_count, most_count
        Its extremes over the mesh.
    """

    filling: int
    source: str
    how: str
    fermi_ev: float | None
    mean_count: float | None
    least_count: int | None
    most_count: int | None


@dataclass(frozen=True, slots=True)
class GapSample:
    """Gaps found by sampling: attained values, hence upper bounds, never a proof.

    Attributes
    ----------
    direct_ev, direct_k
        Smallest E[N] - E[N-1] that was met, eV, and its k (fractional).
    indirect_ev
        min E[N] - max E[N-1] over what was met; negative for a semimetal.
    vbm_ev, vbm_k, cbm_ev, cbm_k
        Band edges and their k.
    mesh
        The mesh that was sampled before refinement.
    mesh_direct_ev
        Smallest direct gap on the mesh alone.
    status
        "insulator", "semimetal-direct-gap", "gapless" or "unresolved".
    n_solves
        Eigenvalue problems solved.
    """

    direct_ev: float
    direct_k: tuple[float, float, float]
    indirect_ev: float
    vbm_ev: float
    vbm_k: tuple[float, float, float]
    cbm_ev: float
    cbm_k: tuple[float, float, float]
    mesh: tuple[int, int, int]
    mesh_direct_ev: float
    status: str
    n_solves: int


@dataclass(frozen=True, slots=True, eq=False)
class GapMap:
    """Direct gap over one reciprocal cell of a plane of k.

    Attributes
    ----------
    axis, fixed_frac
        Component of k (0, 1, 2) that is the same all over the plane, and its value, fractional.
    u_frac, v_frac
        (n_u,), (n_v,) the two other components, in their order, over one period about the
        half-integer next to the minimum.
    gap_ev
        (n_u, n_v) eV.
    minimum_frac
        Where the smallest direct gap was met; in the plane.
    """

    axis: int
    fixed_frac: float
    u_frac: FloatArray
    v_frac: FloatArray
    gap_ev: FloatArray
    minimum_frac: tuple[float, float, float]


@dataclass(frozen=True, slots=True, eq=False)
class BandPath:
    """Bands along the lattice's special-point path (ASE's special points).

    Attributes
    ----------
    k_frac
        (n_k, 3) fractional in the Hamiltonian's own cell.
    distance
        (n_k,) arc length, 1/angstrom (2 pi included); equal at both sides of a jump.
    energies_ev
        (n_k, n_orb).
    label_index, labels
        Indices into k_frac and the names of the special points there ("G" for Gamma).
    """

    k_frac: FloatArray
    distance: FloatArray
    energies_ev: FloatArray
    label_index: tuple[int, ...]
    labels: tuple[str, ...]
    lattice: str


@dataclass(frozen=True, slots=True)
class InterpolationCheck:
    """How well H(k) reproduces the energies that came with it; None where no file was given.

    Attributes
    ----------
    mesh_occupied_mev
        Largest difference of occupied bands to `.eig` on the coarse mesh.
    mesh_low_conduction_mev
        The same for the two lowest empty bands (often disentangled, hence rough).
    mesh_points
        Number of mesh points compared.
    path_occupied_mev, path_all_mev
        Largest difference to `_band.dat`, occupied bands and all bands.
    path_points
        Number of path points compared.
    excluded_offset
        Index of the band of `.eig` that matches Wannier band 0.
    """

    mesh_occupied_mev: float | None
    mesh_low_conduction_mev: float | None
    mesh_points: int
    path_occupied_mev: float | None
    path_all_mev: float | None
    path_points: int
    excluded_offset: int | None
