"""Every compound of the invented campaign, vetted: never another answer than the true one.

"undetermined" passes only where the files do not hold the answer. Answers are those of the models'
papers; see `topovet.demo`.
"""

from __future__ import annotations

import json
from importlib import resources
from pathlib import Path

import jsonschema
import pytest

import topovet
from topovet.demo.campaign import COMPOUNDS
from topovet.demo.compound import Compound
from topovet.demo.writer import write_draft
from topovet.errors import InputError, TopovetError
from topovet.pipeline.dossier import start_run
from topovet.report.json_document import verdict_json
from topovet.verdict.document import Verdict

SCHEMA = json.loads(
    resources.files("topovet").joinpath("report/verdict.schema.json").read_text(encoding="utf-8")
)

READABLE = [c for c in COMPOUNDS if c.truth]

QUICKLY = [("quick", c) for c in READABLE]
IN_FULL = [("standard", c) for c in READABLE]


@pytest.mark.parametrize(
    ("effort", "compound"),
    [*QUICKLY, *(pytest.param(*pair, marks=pytest.mark.endurance) for pair in IN_FULL)],
    ids=lambda x: x if isinstance(x, str) else x.code,
)
def test_verdict_is_true_or_open_with_its_reason(
    effort: str, compound: Compound, tmp_path: Path
) -> None:
    write_draft(compound.draft(), tmp_path, compound.code)
    verdict: Verdict = start_run(tmp_path, settings={"effort": effort}).result("verdict")
    raised = {flag.code for flag in verdict.flags}
    assert set(compound.flags) <= raised, f"{compound.about}: only {sorted(raised)}"
    if verdict.class_ == "undetermined" and compound.may_stay_open:
        assert verdict.invariants.z2 is None
        assert any(flag.severity == "error" for flag in verdict.flags)
    else:
        assert (verdict.class_, verdict.invariants.z2) == (compound.truth, compound.z2)
    if not compound.flags:
        assert not raised, f"{compound.about}: a false alarm"
    if compound.truth == "chern":
        # |C| = 1 where m = 0 (Haldane, PRL 61, 2015 (1988), doi:10.1103/PhysRevLett.61.2015)
        assert verdict.invariants.chern in (1, -1)
    jsonschema.Draft202012Validator(SCHEMA).validate(json.loads(verdict_json(verdict)))


def test_cases_that_cannot_be_read_say_why(tmp_path: Path) -> None:
    broken, silent = (c for c in COMPOUNDS if not c.truth)
    for compound in (broken, silent):
        write_draft(compound.draft(), tmp_path / compound.code, compound.code)
    with pytest.raises(InputError, match=r"GX-29_hr\.dat, line \d+: found the cut line"):
        topovet.vet(tmp_path / broken.code)
    with pytest.raises(TopovetError, match="electron count is not stated"):
        topovet.vet(tmp_path / silent.code)
