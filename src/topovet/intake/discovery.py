"""Finding the files of a case: one seedname, its companions, a structure, the settings."""

from __future__ import annotations

import hashlib
import os
from collections.abc import Iterable
from pathlib import Path

from topovet.errors import InputError, quoted
from topovet.intake.records import CaseFiles

_COMPANIONS = {
    "hr": "_hr.dat",
    "tb": "_tb.dat",
    "win": ".win",
    "wsvec": "_wsvec.dat",
    "centres": "_centres.xyz",
    "eig": ".eig",
    "band": "_band.dat",
    "band_kpt": "_band.kpt",
}
"""Field of `CaseFiles` -> what follows the seedname."""

_SETTINGS = "case.toml"

STRUCTURE_NAMES = ("POSCAR", "CONTCAR")
STRUCTURE_SUFFIXES = (".vasp", ".poscar", ".cif", ".xsf", ".extxyz", ".xyz")
"""Structure files in order of preference: the names, then the suffixes."""

_CHUNK = 2**20


def find_case(path: str | Path) -> CaseFiles:
    """The files of the case at path; nothing is opened.

    Every file may be gzipped (`.gz`). Where a folder holds several structures, the first in this
    order is taken: POSCAR, CONTCAR, then by suffix .vasp, .poscar, .cif, .xsf, .extxyz, .xyz;
    of one kind, the one that bears the seedname.

    Parameters
    ----------
    path
        A case folder, or one `*_hr.dat` or `*_tb.dat`, gzipped or not. A file that is named
        directly is taken, whatever else is in its folder.

    Returns
    -------
    CaseFiles

    Raises
    ------
    InputError
        Nothing there, no Hamiltonian file, more than one seedname, a file both plain and
        gzipped, a link that leads nowhere, or structures of one kind with no preference.
    """
    path = Path(path)
    if not os.path.lexists(path):
        raise InputError(
            path,
            found="no such file or folder",
            expected="a case folder or an _hr.dat file",
            todo="check the path",
        )
    if os.path.isdir(path):
        names = _names_in(path)
        return _case_of(path, _only_seedname(path, names), names, {})
    return _case_of_file(path)


def sha256_of(path: str | Path) -> tuple[str, int]:
    """SHA-256 (hex) and length in bytes of a file as it lies on disk, read in pieces."""
    digest, length = hashlib.sha256(), 0
    try:
        with open(path, "rb") as stream:
            while chunk := stream.read(_CHUNK):
                digest.update(chunk)
                length += len(chunk)
    except OSError as error:
        raise InputError(
            path,
            found=f"a file that cannot be read ({error.strerror})",
            expected="a readable file",
            todo="check its permissions",
        ) from error
    return digest.hexdigest(), length


def _names_in(folder: Path) -> list[str]:
    """Names of the folder, hidden files (editors and file managers leave them) apart."""
    try:
        return sorted(name for name in os.listdir(folder) if not name.startswith("."))
    except OSError as error:
        raise InputError(
            folder,
            found=f"a folder that cannot be listed ({error.strerror})",
            expected="a readable case folder",
            todo="check its permissions",
        ) from error


def _case_of_file(path: Path) -> CaseFiles:
    for field in ("hr", "tb"):
        seedname = _stem(path.name, _COMPANIONS[field])
        if seedname:
            _check_regular(path)
            return _case_of(path.parent, seedname, _names_in(path.parent), {field: str(path)})
    if path.is_symlink():  # of a link that leads nowhere the name is not what is wrong
        _check_regular(path)
    raise InputError(
        path,
        found=f"a file named {quoted(path.name)}",
        expected="a case folder, or a file whose name ends in _hr.dat or _tb.dat (or .gz)",
        todo="give the folder, or rename the file as Wannier90 names it",
    )


def _only_seedname(folder: Path, names: list[str]) -> str:
    stems = {_stem(name, _COMPANIONS[field]) for name in names for field in ("hr", "tb")}
    seednames = sorted(stem for stem in stems if stem)
    if len(seednames) == 1:
        return seednames[0]
    if not seednames:
        raise InputError(
            folder,
            found=f"{_counted(names)}, none of them a Hamiltonian",
            expected="NAME_hr.dat or NAME_tb.dat (or .gz)",
            todo="copy it here, or set write_hr = .true. and run Wannier90 again",
        )
    raise InputError(
        folder,
        found=f"{len(seednames)} seednames ({_enumerated(seednames)})",
        expected="one case in a folder",
        todo="give the path of one _hr.dat file, or keep each case in a folder of its own",
    )


def _case_of(folder: Path, seedname: str, names: list[str], chosen: dict[str, str]) -> CaseFiles:
    """CaseFiles of a seedname; `chosen` holds paths the user named."""
    paths: dict[str, str | None] = {
        field: chosen.get(field) or _plain_or_gzipped(folder, seedname + suffix, names)
        for field, suffix in _COMPANIONS.items()
    }
    return CaseFiles(
        folder=str(folder),
        seedname=seedname,
        structure=_structure(folder, seedname, names),
        settings=_plain_or_gzipped(folder, _SETTINGS, names),
        spinless=None,
        **paths,
    )


def _plain_or_gzipped(folder: Path, name: str, names: list[str]) -> str | None:
    present = [found for found in (name, name + ".gz") if found in names]
    if not present:
        return None
    if len(present) == 2:
        raise InputError(
            folder / name,
            found=f"both {quoted(present[0])} and {quoted(present[1])}",
            expected="one of the two, since they may differ",
            todo="delete the one that is out of date",
        )
    path = folder / present[0]
    _check_regular(path)
    return str(path)


def _check_regular(path: Path) -> None:
    """Refuse what would not end or not exist when opened: dead and circular links, pipes."""
    if os.path.isfile(path):
        return
    found = "a link that leads nowhere" if os.path.islink(path) else "something else"
    if os.path.isdir(path):
        found = "a folder"
    raise InputError(
        path, found=found, expected="an ordinary file", todo="replace it by the file itself"
    )


def _structure(folder: Path, seedname: str, names: list[str]) -> str | None:
    for name in STRUCTURE_NAMES:
        if path := _plain_or_gzipped(folder, name, names):
            return path
    for suffix in STRUCTURE_SUFFIXES:
        stems = {stem for name in names if (stem := _stem(name, suffix))}
        stems = {stem for stem in stems if not (stem + suffix).endswith(_COMPANIONS["centres"])}
        if seedname in stems:
            return _plain_or_gzipped(folder, seedname + suffix, names)
        if len(stems) > 1:
            raise InputError(
                folder,
                found=f"{len(stems)} structures ({_enumerated(s + suffix for s in sorted(stems))})",
                expected="one structure of a kind, or one that bears the seedname",
                todo=f"remove the others or rename the right one {quoted(seedname + suffix)}",
            )
        if stems:
            return _plain_or_gzipped(folder, stems.pop() + suffix, names)
    return None


def _stem(name: str, suffix: str) -> str | None:
    """What stands before the suffix, gzipped or not; None where it is another file or empty."""
    name = name.removesuffix(".gz")
    return name.removesuffix(suffix) or None if name.endswith(suffix) else None


def _counted(names: list[str]) -> str:
    return f"{len(names)} files" if len(names) != 1 else "1 file"


def _enumerated(names: Iterable[str], limit: int = 4) -> str:
    listed = list(names)
    more = f" and {len(listed) - limit} more" if len(listed) > limit else ""
    return ", ".join(quoted(name) for name in listed[:limit]) + more
