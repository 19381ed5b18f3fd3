"""The programming interface: one function, the verdict as an object."""

from __future__ import annotations

from os import PathLike
from pathlib import Path

from topovet.pipeline.dossier import vet_case
from topovet.verdict.document import Verdict


def vet(
    case: str | PathLike[str],
    *,
    filling: int | None = None,
    fermi_ev: float | None = None,
    effort: str = "standard",
    surface: tuple[int, int, int] | None = None,
    out: str | PathLike[str] | None = None,
) -> Verdict:
    """Vet one case.

    Parameters
    ----------
    case
        Case folder, or its `_hr.dat` file.
    filling
        Occupied Wannier bands, spin counted; goes before case.toml and the .win file.
    fermi_ev
        Fermi energy in eV, instead of a filling.
    effort
        "quick", "standard" or "thorough".
    surface
        Miller indices of the surface of interest; recorded, not used by this version.
    out
        Dossier folder; nothing is written without it.

    Returns
    -------
    Verdict
        The content of verdict.json as objects; shows itself in a notebook.

    Raises
    ------
    InputError
        A file is missing or damaged; the message names it, with the line.
    FillingError
        Nothing states the electron count, or it cannot be right.
    ValueError
        Both filling and fermi_ev are given, or effort is unknown.
    """
    if filling is not None and fermi_ev is not None:
        raise ValueError("give filling or fermi_ev, not both")
    if effort not in ("quick", "standard", "thorough"):
        raise ValueError(f"effort is quick, standard or thorough, not {effort!r}")
    settings = {
        "filling": filling,
        "fermi_ev": fermi_ev,
        "effort": effort,
        "surface": None if surface is None else list(surface),
    }
    dossier = vet_case(Path(case), out=None if out is None else Path(out), settings=settings)
    return dossier.verdict
