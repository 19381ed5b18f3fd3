"""`topovet deform` from files to files: what is written, what is refused, what is reported."""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path

import jsonschema
import pytest
from click.testing import CliRunner

import invented_dossiers as invented
from case_writer import write_case
from lattice_models import LatticeModel, bhz
from topovet.cli.deform import command
from topovet.deformation.comparison import NotComparableError
from topovet.pipeline.deform import Deformation, check_sound, deform_cases
from topovet.report.deformation.document import load_deformation_schema
from topovet.verdict.flags import Flag


def _case(model: LatticeModel, folder: Path, name: str, **options: int) -> Path:
    return write_case(replace(model, name=name), folder / name, **options)


@pytest.fixture(scope="module")
def cases(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, Path]:
    folder = tmp_path_factory.mktemp("cases")
    return _case(bhz(m=-1.0), folder, "QW-1"), _case(bhz(m=1.5), folder, "QW-2")


@pytest.fixture(scope="module")
def made(
    cases: tuple[Path, Path], tmp_path_factory: pytest.TempPathFactory
) -> tuple[Path, Deformation]:
    out = tmp_path_factory.mktemp("walk")
    return out, deform_cases(*cases, out=out, effort="quick")


def test_document_page_figure_and_both_dossiers_are_written(
    made: tuple[Path, Deformation],
) -> None:
    out, _ = made
    assert {p.name for p in out.iterdir()} == {"A", "B", "deform.json", "deform.html", "figures"}
    assert (out / "A" / "verdict.json").exists()
    document = json.loads((out / "deform.json").read_text())
    jsonschema.Draft202012Validator(load_deformation_schema()).validate(document)
    (closing,) = document["closings"]
    assert closing["lambda"] == pytest.approx(0.4, abs=1e-6)
    assert [e["n_minus"] for e in closing["exchanges"]] == [[0, 2]]
    assert document["conclusion"]["changes"] == [{"index": "z2", "before": [0], "after": [1]}]
    assert document["conclusion"]["proved"] is False
    assert document["averaging"]["operations"] > 2
    assert document["averaging"]["levels_moved_meV"] == pytest.approx([0, 0], abs=1e-2)


@pytest.mark.endurance
def test_the_same_input_gives_the_same_bytes(
    cases: tuple[Path, Path], made: tuple[Path, Deformation]
) -> None:
    """And the command goes on from what is there, and prints the same."""
    out, first = made
    done = CliRunner().invoke(
        command, [str(c) for c in cases] + ["--out", str(out), "--effort", "quick", "--json"]
    )
    assert done.exit_code == 0
    assert done.stdout == first.json == (out / "deform.json").read_text()


@pytest.mark.parametrize(
    ("spoil", "says"),
    [
        ({"filling": 4}, "QW-1 has 2 filled bands and QW-3 has 4"),
        ({}, "turned by"),
    ],
    ids=["filling", "cell"],
)
def test_what_cannot_be_mixed_is_refused_before_it_is_vetted(
    cases: tuple[Path, Path], tmp_path: Path, spoil: dict[str, int], says: str
) -> None:
    model = bhz(m=1.5)
    if not spoil:
        turned = replace(model.crystal, cell=model.crystal.cell[[1, 0, 2]])
        model = replace(model, crystal=turned)
    other = _case(model, tmp_path, "QW-3", **spoil)
    with pytest.raises(NotComparableError, match=says):
        deform_cases(cases[0], other, out=tmp_path / "out", effort="quick")
    assert not list((tmp_path / "out").glob("*/verdict.json"))


@pytest.mark.parametrize(
    ("code", "severity", "refused"),
    [
        ("filling-off", "error", True),
        ("filling-off", "warning", False),
        ("gap-closes", "error", False),
    ],
)
def test_an_end_is_refused_for_an_error_of_its_input_alone(
    code: str, severity: str, refused: bool
) -> None:
    verdict = replace(invented.strong().verdict, flags=(Flag(code, severity, "It is off."),))
    if not refused:
        check_sound(verdict)
        return
    with pytest.raises(NotComparableError, match=r"carries the flag filling-off .*\(It is off\)"):
        check_sound(verdict)
