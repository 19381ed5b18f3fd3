"""The programming interface: one function, the verdict as an object."""

from __future__ import annotations

from collections.abc import Sequence
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
    lower_gaps: str | Sequence[int] | None = None,
    spinless: str | PathLike[str] | None = None,
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
        Miller indices, in the Hamiltonian's own cell, of the surface (in 2D: the edge) to follow.
    lower_gaps
        "all", or numbers of bands: indices of the lowest bands up to lower gaps, besides.
    spinless
        The same compound without spin-orbit coupling, for how far that may be turned down.
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
        Both filling and fermi_ev are given, or effort or lower_gaps is unknown.
    """
    if filling is not None and fermi_ev is not None:
        raise ValueError("give filling or fermi_ev, not both")
    if effort not in ("quick", "standard", "thorough"):
        raise ValueError(f"effort is quick, standard or thorough, not {effort!r}")
    if isinstance(lower_gaps, str) and lower_gaps != "all":
        raise ValueError(f"lower_gaps is all or numbers of bands, not {lower_gaps!r}")
    settings = {
        "filling": filling,
        "fermi_ev": fermi_ev,
        "effort": effort,
        "surface": None if surface is None else list(surface),
        "lower_gaps": lower_gaps if lower_gaps in (None, "all") else list(lower_gaps),
        "spinless": None if spinless is None else str(Path(spinless).absolute()),
    }
    dossier = vet_case(Path(case), out=None if out is None else Path(out), settings=settings)
    return dossier.verdict
