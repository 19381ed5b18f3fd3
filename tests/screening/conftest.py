"""What the tests of whole screens share."""

from __future__ import annotations

from pathlib import Path

import pytest

from screening_runs import QUICK, Program, copy_program, results, write_small_cases


@pytest.fixture(scope="session")
def program(tmp_path_factory: pytest.TempPathFactory) -> Program:
    return copy_program(tmp_path_factory.mktemp("program"))


@pytest.fixture(scope="session")
def twelve(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Twelve small cases."""
    root = tmp_path_factory.mktemp("twelve")
    write_small_cases(root, 12)
    return root


@pytest.fixture(scope="session")
def six(twelve: Path) -> Path:
    """Half of them."""
    return twelve / "batch0"


@pytest.fixture(scope="session")
def twelve_undisturbed(
    program: Program, twelve: Path, tmp_path_factory: pytest.TempPathFactory
) -> dict[str, str]:
    """What comes out of the twelve cases when nothing happens."""
    return _undisturbed(program, twelve, tmp_path_factory.mktemp("undisturbed"), 12)


@pytest.fixture(scope="session")
def undisturbed(
    program: Program, six: Path, tmp_path_factory: pytest.TempPathFactory
) -> dict[str, str]:
    """What comes out of the six cases when nothing happens."""
    return _undisturbed(program, six, tmp_path_factory.mktemp("undisturbed"), 6)


def _undisturbed(program: Program, root: Path, folder: Path, count: int) -> dict[str, str]:
    done = program.run("screen", root, "--out", folder / "out", *QUICK)
    assert done.returncode == 0, done.stderr
    found = results(folder / "out")
    assert len(found) == count
    return found
