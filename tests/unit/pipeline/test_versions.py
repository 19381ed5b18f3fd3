"""What a new version makes anew: the tasks whose code changed and what rests on them, no more."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import networkx as nx
import pytest

import topovet
from case_writer import write_case
from lattice_models import kane_mele
from topovet.pipeline import dossier
from topovet.pipeline.catalogue import case_tasks
from topovet.pipeline.graph import build_graph
from topovet.pipeline.runner import Run
from topovet.pipeline.task import Task

GRAPH = build_graph(case_tasks())
STORED = [task.name for task in case_tasks() if task.stored]


@pytest.fixture(scope="module")
def case(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return write_case(kane_mele(), tmp_path_factory.mktemp("versions") / "case")


@pytest.fixture(scope="module")
def vetted(case: Path) -> Path:
    """A dossier of this version."""
    out = case.parent / "dossier"
    dossier.vet_case(case, out=out)
    return out


def _raised(name: str) -> tuple[Task, ...]:
    """The catalogue of a version in which one task would give other results."""
    return tuple(replace(t, version=t.version + 1) if t.name == name else t for t in case_tasks())


def _run(case: Path, out: Path, monkeypatch: pytest.MonkeyPatch, raised: str | None = None) -> Run:
    if raised is not None:
        monkeypatch.setattr(dossier, "case_tasks", lambda: _raised(raised))
    return dossier.start_run(case, out=out)


@pytest.mark.parametrize("raised", [task.name for task in case_tasks()])
def test_new_version_of_a_task_changes_its_key_and_those_that_rest_on_it(
    raised: str, case: Path, vetted: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    before = _run(case, vetted, monkeypatch)
    after = _run(case, vetted, monkeypatch, raised)
    changed = {name for name in GRAPH.nodes if before.key(name) != after.key(name)}
    assert changed == {raised, *nx.descendants(GRAPH, raised)}


@pytest.mark.parametrize("raised", ["time-reversal", "parity", "bands"])
def test_only_those_are_computed_again(
    raised: str, case: Path, vetted: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    without = _to_do(_run(case, vetted, monkeypatch))
    stale = {raised, *nx.descendants(GRAPH, raised)}.intersection(STORED)
    assert _to_do(_run(case, vetted, monkeypatch, raised)) == without | stale
    assert len(without | stale) < len(STORED)


def _to_do(run: Run) -> set[str]:
    return {name for name in STORED if run.stored_state(name) == "to do"}


def test_new_release_alone_recomputes_nothing(
    case: Path, vetted: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(topovet, "__version__", "99.0.0")
    computed: list[str] = []

    def observe(event: str, text: str) -> None:
        if event == "end" and ": done" in text:
            computed.append(text.partition(":")[0])

    verdict = dossier.vet_case(case, out=vetted, observe=observe).verdict
    assert verdict.provenance.version == "99.0.0"
    assert not set(computed) & set(STORED)
