"""A case before it is written: every file as data, so that a fault is a small change of it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace

import numpy as np

from topovet.arrays import ComplexArray, FloatArray, IntArray
from topovet.demo.lattice import HARMONICS, LatticeModel
from topovet.demo.mesh import Mesh, energies_at, mesh_points, on_mesh
from topovet.intake.records import WsShifts
from topovet.intake.shifts.ws_shifts import rebuild_shifts

HR_DECIMALS = 6
"""As Wannier90 writes them."""

FERMI_DECIMALS = 4


@dataclass(frozen=True, slots=True, eq=False)
class Draft:
    """The files of one case.

    Attributes
    ----------
    cell, symbols, positions_frac
        Structure of the `.win` file: (3, 3) angstrom, rows; one symbol and (n_atoms, 3) each.
    projections
        Lines of the projections block; empty writes none.
    spinors
        Whether the `.win` file says so.
    mesh
        k-points along each direction.
    r_cells, degeneracies, h_r
        (n_r, 3), (n_r,) and (n_r, n_orb, n_orb) eV as `_hr.dat` gets them, rounded.
    fermi_ev
        For the `.win` file.
    settings
        Keys of `case.toml` and their values as TOML.
    centres_cart
        (n_orb, 3) angstrom for `_centres.xyz`; None writes none.
    shifts
        For `_wsvec.dat`; None writes none and switches `use_ws_distance` off.
    energies_ev
        (n_k, n_orb) for `.eig`; None writes none.
    poscar_cell
        (3, 3) angstrom: writes a POSCAR with this cell and the same fractions; None writes none.
    decimals
        Digits of H(R) after the point.
    kept_share
        Share of `_hr.dat` that reaches the disk; 1 for a whole file.
    packed
        Whether the large files are gzipped.
    """

    cell: FloatArray
    symbols: tuple[str, ...]
    positions_frac: FloatArray
    projections: tuple[str, ...]
    spinors: bool
    mesh: Mesh
    r_cells: IntArray
    degeneracies: IntArray
    h_r: ComplexArray
    fermi_ev: float | None
    settings: Mapping[str, str] = field(default_factory=dict)
    centres_cart: FloatArray | None = None
    shifts: WsShifts | None = None
    energies_ev: FloatArray | None = None
    poscar_cell: FloatArray | None = None
    decimals: int = HR_DECIMALS
    kept_share: float = 1.0
    packed: bool = False

    @property
    def n_orb(self) -> int:
        return int(self.h_r.shape[1])


def draft_case(model: LatticeModel, mesh: Mesh, *, shared: bool = False) -> Draft:
    """A sound case of a model: filling stated, Fermi energy in the middle of the gap.

    Parameters
    ----------
    model
        With the energies it is to have.
    mesh
        k-points along each periodic direction, 1 along the others.
    shared
        Written with `use_ws_distance`, so with centres, shifts and energies of the mesh; files
        that large are gzipped.
    """
    crystal, positions = model.crystal, model.basis.positions_frac
    r_cells, degeneracies, h_r = on_mesh(model, mesh)
    energies = energies_at(mesh_points(mesh), r_cells, degeneracies, h_r)
    middle = (energies[:, model.filling - 1].max() + energies[:, model.filling].min()) / 2
    plain = Draft(
        cell=crystal.cell,
        symbols=crystal.symbols,
        positions_frac=crystal.positions_frac,
        projections=projection_lines(model),
        spinors=model.spinful,
        mesh=mesh,
        r_cells=r_cells,
        degeneracies=degeneracies,
        h_r=rounded(h_r, HR_DECIMALS),
        fermi_ev=round(float(middle), FERMI_DECIMALS),
        settings={"filling": str(model.filling), "dimension": str(crystal.dimension)},
    )
    if not shared:
        return plain
    return replace(
        plain,
        centres_cart=positions @ crystal.cell,
        shifts=rebuild_shifts(r_cells, positions, mesh, crystal.cell),
        energies_ev=energies,
        packed=True,
    )


def rounded(h_r: ComplexArray, decimals: int) -> ComplexArray:
    """To the digits of the file, without negative zeros: those hang on a processor's last bit."""
    return np.asarray(h_r.round(decimals) + 0.0)


def projection_lines(model: LatticeModel) -> tuple[str, ...]:
    """One line for each spatial orbital; second and further shells of a kind by radial number."""
    basis, step = model.basis, 2 if model.spinful else 1
    lines = []
    for n in range(0, basis.n_orb, step):
        (column,) = np.flatnonzero(basis.harmonics[n])
        place = ",".join(f"{x:.6f}" for x in basis.positions_frac[n])
        radial = f":r={basis.shells[n]}" if basis.shells[n] > 1 else ""
        lines.append(f"f={place}:{HARMONICS[column]}{radial}")
    return tuple(lines)
