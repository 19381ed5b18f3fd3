"""The cases of a screen: what lies below a folder, or what a list names."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from topovet.errors import InputError, quoted
from topovet.intake.case_list import ListedCase, read_case_list
from topovet.intake.case_tree import find_case_folders
from topovet.screening.records import ScreenCase
from topovet.screening.slugs import case_slugs


@dataclass(frozen=True, slots=True)
class FoundCases:
    """Cases in order of their slugs, and what was passed by, in sentences."""

    cases: tuple[ScreenCase, ...]
    notes: tuple[str, ...]


def find_cases(root: Path, *, out: Path, settings: Mapping[str, Any]) -> FoundCases:
    """The cases below a folder, or those of a list (a file named `*.csv`).

    Parameters
    ----------
    root
        Folder or list.
    out
        Where the dossiers go; not searched.
    settings
        Options for all cases; what a list states for a case is added.

    Raises
    ------
    InputError
        There are none, the list has an error, or a dossier would go into its own case folder.
    """
    found = _listed(root, settings) if root.is_file() else _below(root, out, settings)
    for case in found.cases:
        folder = (out / case.slug).absolute()
        if folder in (Path(case.path), Path(case.path).parent):
            raise InputError(
                folder,
                found="that the dossier of a case would go into the folder of the case itself",
                expected="dossiers and cases in folders of their own",
                todo="choose another --out",
            )
    return found


def _below(root: Path, out: Path, settings: Mapping[str, Any]) -> FoundCases:
    if root.is_dir() and out.resolve() == root.resolve():
        raise InputError(
            root,
            found="the same folder as --out",
            expected="a folder of its own for the dossiers",
            todo=f"choose another, such as --out {root.name or 'cases'}-dossiers",
        )
    tree = find_case_folders(root, passed_by=out)
    notes = tuple(
        f"{quoted(str(folder), 200)} cannot be listed ({reason}); cases below it are missing here"
        for folder, reason in tree.unreadable
    )
    if not tree.folders:
        raise InputError(
            root,
            found="no Hamiltonian at any depth" + "".join(f"; {note}" for note in notes),
            expected="folders with NAME_hr.dat or NAME_tb.dat (or .gz)",
            todo="give the folder that holds the cases, or a list of them (NAME.csv)",
        )
    names = [_name_below(folder, root) for folder in tree.folders]
    return FoundCases(_cases(names, tree.folders, [settings] * len(names)), notes)


def _listed(path: Path, settings: Mapping[str, Any]) -> FoundCases:
    if path.suffix.lower() != ".csv":
        raise InputError(
            path,
            found="a file",
            expected="a folder with cases below it, or a list of cases (NAME.csv)",
            todo="for a single case use topovet vet",
        )
    listed = read_case_list(path)
    names = [case.name or case.written for case in listed.cases]
    merged = [{**settings, **_stated(case, path.name)} for case in listed.cases]
    notes = (
        (f"columns of {path.name} that are not used: " + ", ".join(map(quoted, listed.unused)),)
        if listed.unused
        else ()
    )
    return FoundCases(_cases(names, [case.path for case in listed.cases], merged), notes)


def _stated(case: ListedCase, list_name: str) -> dict[str, Any]:
    """Options that a row states; lists rather than tuples, as they are in JSON."""
    values: dict[str, Any] = {
        "name": case.name,
        "filling": case.filling,
        "fermi_ev": case.fermi_ev,
        "dimension": case.dimension,
        "inversion_centre": None if case.inversion_centre is None else list(case.inversion_centre),
        "surface": None if case.surface is None else list(case.surface),
        "spinless": None if case.spinless is None else str(case.spinless.absolute()),
    }
    stated = {key: value for key, value in values.items() if value is not None}
    if {"filling", "fermi_ev"} & set(stated):
        stated["stated_in"] = list_name
    return stated


def _name_below(folder: Path, root: Path) -> str:
    return root.resolve().name or "case" if folder == root else folder.relative_to(root).as_posix()


def _cases(
    names: Sequence[str], paths: Sequence[Path], settings: Sequence[Mapping[str, Any]]
) -> tuple[ScreenCase, ...]:
    cases = [
        ScreenCase(slug, name, str(path.absolute()), own)
        for slug, name, path, own in zip(case_slugs(names), names, paths, settings, strict=True)
    ]
    return tuple(sorted(cases, key=lambda case: case.slug))
