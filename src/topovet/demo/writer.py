"""A draft as a case folder in Wannier90's formats; every file says that it is invented."""

from __future__ import annotations

import gzip
import json
from collections.abc import Iterable, Iterator
from pathlib import Path

import numpy as np

from topovet.arrays import FloatArray
from topovet.demo.draft import Draft
from topovet.demo.mesh import mesh_points
from topovet.intake.hamiltonian.hr_write import write_hr
from topovet.intake.records import WsShifts

INVENTED = "invented for a demonstration, no real compound"


def write_draft(draft: Draft, folder: Path, code: str) -> None:
    """Write all files of a case named after its code.

    Parameters
    ----------
    draft
        What the files say.
    folder
        Is made; files of the same names are replaced.
    code
        Seedname and name of the compound.
    """
    folder.mkdir(parents=True, exist_ok=True)
    (folder / f"{code}.win").write_text(_win(draft, code))
    (folder / "case.toml").write_text(_toml(draft, code))
    if draft.poscar_cell is not None:
        (folder / "POSCAR").write_text(_poscar(draft, code))
    if draft.centres_cart is not None:
        (folder / f"{code}_centres.xyz").write_text(_centres(draft, draft.centres_cart, code))
    if draft.energies_ev is not None:
        _write_large(folder / f"{code}.eig", _eig(draft.energies_ev), draft.packed)
    if draft.shifts is not None:
        _write_large(folder / f"{code}_wsvec.dat", wsvec_text(draft.shifts), draft.packed)
    _write_hamiltonian(draft, folder / f"{code}_hr.dat{'.gz' if draft.packed else ''}", code)


def _write_hamiltonian(draft: Draft, path: Path, code: str) -> None:
    write_hr(
        path,
        draft.r_cells,
        draft.h_r,
        degeneracies=draft.degeneracies,
        header=f"{code}: {INVENTED}",
        decimals=draft.decimals,
    )
    if draft.kept_share < 1:
        data = path.read_bytes()
        path.write_bytes(data[: int(draft.kept_share * len(data))])


def _write_large(path: Path, text: str, packed: bool) -> None:
    if packed:
        # no time inside: the same text gives the same bytes
        path.with_name(f"{path.name}.gz").write_bytes(gzip.compress(text.encode(), mtime=0))
    else:
        path.write_text(text)


def _win(draft: Draft, code: str) -> str:
    lines = [
        f"! {code}: {INVENTED}",
        f"num_wann = {draft.n_orb}",
        f"spinors = .{str(draft.spinors).lower()}.",
        f"use_ws_distance = .{str(draft.shifts is not None).lower()}.",
        "mp_grid : " + " ".join(map(str, draft.mesh)),
    ]
    if draft.fermi_ev is not None:
        lines.append(f"fermi_energy = {draft.fermi_ev:.6f}")
    atoms = [
        f"{symbol:<3}{_row(position)}"
        for symbol, position in zip(draft.symbols, draft.positions_frac, strict=True)
    ]
    lines += _block("unit_cell_cart", ["ang", *map(_row, draft.cell)])
    lines += _block("atoms_frac", atoms)
    if draft.projections:
        lines += _block("projections", draft.projections)
    if draft.energies_ev is not None:
        lines += _block("kpoints", map(_row, mesh_points(draft.mesh)))
    return "\n".join(lines) + "\n"


def _block(name: str, lines: Iterable[str]) -> list[str]:
    return ["", f"begin {name}", *lines, f"end {name}"]


def _toml(draft: Draft, code: str) -> str:
    name = json.dumps(f"{code} (invented)")
    rest = (f"{key} = {value}" for key, value in draft.settings.items())
    return "\n".join([f"# {INVENTED}", f"name = {name}", *rest]) + "\n"


def _poscar(draft: Draft, code: str) -> str:
    assert draft.poscar_cell is not None
    return (
        "\n".join(
            [
                f"{code}: {INVENTED}",
                "1.0",
                *map(_row, draft.poscar_cell),
                " ".join(draft.symbols),
                " ".join("1" for _ in draft.symbols),
                "Direct",
                *map(_row, draft.positions_frac),
            ]
        )
        + "\n"
    )


def _centres(draft: Draft, centres_cart: FloatArray, code: str) -> str:
    atoms = draft.positions_frac @ draft.cell
    rows = [f"X  {_row(centre)}" for centre in centres_cart]
    rows += [f"{s:<3}{_row(at)}" for s, at in zip(draft.symbols, atoms, strict=True)]
    return "\n".join([f"{len(rows):6d}", f" {code}: {INVENTED}", *rows]) + "\n"


def _eig(energies_ev: FloatArray) -> str:
    return "".join(
        f"{band + 1:5d}{k + 1:5d}{energy:18.12f}\n"
        for k, row in enumerate(energies_ev.tolist())
        for band, energy in enumerate(row)
    )


def wsvec_text(shifts: WsShifts, header: str = f"## {INVENTED}") -> str:
    """A `_wsvec.dat` in Wannier90's own columns."""
    return (
        "\n".join([header, *(line for record in wsvec_records(shifts) for line in record)]) + "\n"
    )


def wsvec_records(shifts: WsShifts) -> Iterator[list[str]]:
    """The lines of each record of a `_wsvec.dat`, in C order of (R, m, n)."""
    start = 0
    for (r, m, n), count in np.ndenumerate(shifts.counts):
        label = (*shifts.r_cells[r].tolist(), m + 1, n + 1)
        vectors = shifts.shifts[start : start + count].tolist()
        start += count
        yield [
            "".join(f"{value:5d}" for value in label),
            f"{count:5d}",
            *("".join(f"{value:5d}" for value in vector) for vector in vectors),
        ]


def _row(values: FloatArray) -> str:
    # rounded first, and no negative zero: neither may hang on the last bit of a processor
    return " ".join(f"{round(value, 10) + 0.0:16.10f}" for value in values.tolist())
