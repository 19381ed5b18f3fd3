"""The invented campaign: a folder for each compound, with its scenario and the right answers."""

from __future__ import annotations

import csv
import io
from collections.abc import Sequence
from pathlib import Path

from topovet.demo.compound import Compound
from topovet.demo.flawed_cases import FLAWED
from topovet.demo.sound_cases import HARD, INSULATORS
from topovet.demo.writer import write_draft
from topovet.errors import InputError

COMPOUNDS: tuple[Compound, ...] = (*INSULATORS, *HARD, *FLAWED)
"""All compounds of the campaign, in the order of their codes."""

CASES, DOSSIERS, ANSWERS = "cases", "dossiers", "answers.csv"
"""What is in the folder of a demo: the input, what screening makes of it, and the truth."""

SCENARIO = """\
INVENTED FROM BEGINNING TO END

No consortium, laboratory, compound or calculation named here exists. The Hamiltonians are lattice
models of the literature in made-up crystals, written in Wannier90's file formats so that the whole
road can be tried: vetting, screening, shortlist.

The Seventh Furnace, a consortium of four laboratories that does not exist, looks for compounds
whose surfaces conduct better than their bulk. Its computing group has left {n} folders, GX-01 to
GX-{n:02d}, behind; some are as they should be, some were edited, cut, mixed up or declared wrongly
on the way. Three crystals can be grown this year. Which?

{cases}/        one folder for each compound
{answers}   what each compound is and what is wrong with it: look last
{dossiers}/     what screening made of them, with shortlist.html

The answers were not made with this program: each follows from the paper of its model.
"""


def write_campaign(folder: Path, *, force: bool = False) -> Path:
    """Write all cases, the scenario and the answers.

    Parameters
    ----------
    folder
        New or empty; with `force` also one that holds files, of which those of the same names
        are replaced and no others touched.

    Returns
    -------
    Path
        The folder with the cases.

    Raises
    ------
    InputError
        Something is there already.
    """
    _check_free(folder, force)
    for compound in COMPOUNDS:
        write_draft(compound.draft(), folder / CASES / compound.code, compound.code)
    scenario = SCENARIO.format(n=len(COMPOUNDS), cases=CASES, dossiers=DOSSIERS, answers=ANSWERS)
    (folder / "README.txt").write_text(scenario, encoding="utf-8")
    (folder / ANSWERS).write_text(_answers(COMPOUNDS), encoding="utf-8")
    return folder / CASES


def _check_free(folder: Path, force: bool) -> None:
    if folder.exists() and not folder.is_dir():
        raise InputError(
            folder, found="a file", expected="a new or empty folder", todo="choose another name"
        )
    if folder.is_dir() and any(folder.iterdir()) and not force:
        raise InputError(
            folder,
            found="a folder that is not empty",
            expected="a new or empty folder",
            todo="choose another one, or add --force to replace the demo's files in it",
        )


def _answers(compounds: Sequence[Compound]) -> str:
    table = io.StringIO()
    writer = csv.writer(table, lineterminator="\n")
    writer.writerow(["name", "about", "class", "z2", "flags"])
    for c in compounds:
        z2 = "" if c.z2 is None else _indices(c.z2)
        writer.writerow([c.code, c.about, c.truth or "cannot be vetted", z2, " ".join(c.flags)])
    return table.getvalue()


def _indices(z2: tuple[int, ...]) -> str:
    strong, *weak = map(str, z2)
    return f"{strong};({''.join(weak)})" if weak else strong
