"""A lattice model as a case folder, the way Wannier90 and its user would leave it."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from lattice_models import HARMONICS, LatticeModel
from topovet.arrays import FloatArray, IntArray
from topovet.intake.hamiltonian.hr_write import write_hr
from topovet.model.basis import OrbitalBasis


def write_case(
    model: LatticeModel,
    folder: Path,
    *,
    filling: int | None = None,
    fermi_ev: float | None = None,
    declare_projections: bool = True,
    declare_centre: bool = False,
    mp_grid: tuple[int, int, int] | None = None,
    degeneracies: IntArray | None = None,
    decimals: int = 6,
) -> Path:
    """Write `NAME_hr.dat`, `NAME.win`, `POSCAR` and `case.toml` below folder; return the folder.

    Parameters
    ----------
    filling, fermi_ev
        For `case.toml`; the model's own filling where both are None.
    declare_projections
        Whether the `.win` file has a projections block.
    declare_centre
        Whether `case.toml` names the model's inversion centre.
    mp_grid
        Written to the `.win` file; left out if None.
    degeneracies
        (n_r,) weights; each H(R) is written multiplied by its own, as Wannier90 does.
    """
    folder.mkdir(parents=True, exist_ok=True)
    weights = np.ones(len(model.r_cells), dtype=np.int64) if degeneracies is None else degeneracies
    write_hr(
        folder / f"{model.name}_hr.dat",
        model.r_cells,
        model.h_r * weights[:, None, None],
        degeneracies=weights,
        decimals=decimals,
    )
    (folder / f"{model.name}.win").write_text(_win(model, declare_projections, mp_grid))
    (folder / "POSCAR").write_text(_poscar(model))
    (folder / "case.toml").write_text(_toml(model, filling, fermi_ev, declare_centre))
    return folder


def _win(model: LatticeModel, projections: bool, mp_grid: tuple[int, int, int] | None) -> str:
    atoms = [
        f"{symbol} {_numbers(position)}"
        for symbol, position in zip(
            model.crystal.symbols, model.crystal.positions_frac, strict=True
        )
    ]
    lines = [
        f"num_wann = {model.n_orb}",
        f"spinors = .{str(model.spinful).lower()}.",
        # H(R) of a model is exact as it stands: no shifts belong to it
        "use_ws_distance = .false.",
        *_block("unit_cell_cart", ["ang", *map(_numbers, model.crystal.cell)]),
        *_block("atoms_frac", atoms),
    ]
    if projections:
        lines += _block("projections", projection_lines(model.basis, model.spinful))
    if mp_grid is not None:
        lines.append("mp_grid : " + " ".join(map(str, mp_grid)))
    return "\n".join(lines) + "\n"


def projection_lines(basis: OrbitalBasis, spinful: bool) -> list[str]:
    """One line for each spatial orbital, so that no ordering rule of the grammar can intervene.

    Raises
    ------
    ValueError
        A function that is not a single real harmonic of the s, p shells with spin along z.
    """
    lines = []
    n = 0
    while n < basis.n_orb:
        columns = np.flatnonzero(basis.harmonics[n])
        if len(columns) != 1 or columns[0] >= len(HARMONICS) or basis.harmonics[n].sum() != 1:
            raise ValueError(f"{basis.labels[n]} is no single s or p harmonic")
        line = f"f={','.join(f'{x:.10f}' for x in basis.positions_frac[n])}:{HARMONICS[columns[0]]}"
        if basis.shells[n] > 1:
            line += f":r={basis.shells[n]}"
        if not spinful:
            lines.append(line)
            n += 1
        elif _is_pair(basis, n):
            lines.append(line)
            n += 2
        else:
            lines.append(line + ("(u)" if basis.spinors[n, 0] else "(d)"))
            n += 1
    return lines


def _is_pair(basis: OrbitalBasis, n: int) -> bool:
    """Whether functions n and n + 1 are up and down of one orbital."""
    return (
        n + 1 < basis.n_orb
        and np.array_equal(basis.spinors[n : n + 2], np.eye(2))
        and np.array_equal(basis.harmonics[n], basis.harmonics[n + 1])
        and np.array_equal(basis.positions_frac[n], basis.positions_frac[n + 1])
        and basis.shells[n] == basis.shells[n + 1]
    )


def _poscar(model: LatticeModel) -> str:
    """Atoms in their own order: VASP allows an element to come up again."""
    crystal = model.crystal
    lines = [
        model.name,
        "1.0",
        *map(_numbers, crystal.cell),
        " ".join(crystal.symbols),
        " ".join("1" for _ in crystal.symbols),
        "Direct",
        *map(_numbers, crystal.positions_frac),
    ]
    return "\n".join(lines) + "\n"


def _toml(
    model: LatticeModel, filling: int | None, fermi_ev: float | None, declare_centre: bool
) -> str:
    lines = [f'name = "{model.name}"', f"dimension = {model.crystal.dimension}"]
    if fermi_ev is not None:
        lines.append(f"fermi_eV = {fermi_ev:.10g}")
    if filling is not None or fermi_ev is None:
        lines.append(f"filling = {model.filling if filling is None else filling}")
    if declare_centre:
        lines.append("inversion_centre = [" + ", ".join(f"{x:.10g}" for x in model.centre) + "]")
    return "\n".join(lines) + "\n"


def _block(name: str, lines: list[str]) -> list[str]:
    return [f"begin {name}", *lines, f"end {name}"]


def _numbers(values: FloatArray) -> str:
    return " ".join(f"{x:16.10f}" for x in values)
