"""Running a graph: caching by content, skipping with reasons, resuming, failing."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from topovet.errors import InputError, NoGapError, TopovetError
from topovet.intake.records import CaseFiles
from topovet.pipeline.codec import Codec
from topovet.pipeline.graph import build_graph
from topovet.pipeline.inputs import CaseInput
from topovet.pipeline.runner import Run
from topovet.pipeline.store import Store
from topovet.pipeline.task import NotApplicable, Task


class Bench:
    """A small graph whose tasks note when they run."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder
        self.ran: list[str] = []
        self.fail: dict[str, BaseException] = {}
        self.version = 1

    def _body(self, name: str) -> Callable[..., Any]:
        def body(*, context: Any, **uses: Any) -> str:
            self.ran.append(name)
            if name in self.fail:
                raise self.fail[name]
            return f"{name}({','.join(str(uses[key]) for key in sorted(uses))})"

        return body

    def tasks(self) -> tuple[Task, ...]:
        return (
            Task("read", "", self._body("read"), reads=("hr",), stored=False, essential=True),
            Task("spectrum", "", self._body("spectrum"), needs=("read",), settings=("effort",)),
            Task("witness", "", self._body("witness"), needs=("read",), version=self.version),
            Task("extra", "", self._body("extra"), needs=("witness",)),
            Task("end", "", self._body("end"), needs=("spectrum",), wants=("extra",)),
        )

    def run(self, *, digest: str = "1", **settings: Any) -> Run:
        self.ran.clear()
        run = Run(
            graph=build_graph(self.tasks()),
            files=CaseFiles("", "x"),
            inputs=(CaseInput("hr", "x_hr.dat", digest, 1),),
            settings={"effort": "standard", **settings},
            store=Store(self.folder, Codec(())),
        )
        run.execute()
        return run


@pytest.fixture
def bench(tmp_path: Path) -> Bench:
    return Bench(tmp_path)


def test_everything_runs_once(bench: Bench) -> None:
    run = bench.run()
    assert bench.ran == ["read", "spectrum", "witness", "extra", "end"]
    assert run.result("end") == "end(extra(witness(read())),spectrum(read()))"
    assert {s.state for s in run.states.values()} == {"done"}


def test_second_run_reads_no_file(bench: Bench) -> None:
    first = bench.run().result("end")
    second = bench.run()
    assert bench.ran == []
    assert second.result("end") == first
    assert second.states["end"].state == "cached"


def test_one_option_recomputes_only_what_depends_on_it(bench: Bench) -> None:
    bench.run()
    bench.run(effort="quick")
    assert bench.ran == ["read", "spectrum", "end"]


def test_an_option_no_task_declares_changes_nothing(bench: Bench) -> None:
    bench.run()
    bench.run(colour="red")
    assert bench.ran == []


def test_changed_file_recomputes_all(bench: Bench) -> None:
    bench.run()
    bench.run(digest="2")
    assert bench.ran == ["read", "spectrum", "witness", "extra", "end"]


def test_new_version_of_a_task_recomputes_it_and_its_users(bench: Bench) -> None:
    bench.run()
    bench.version = 2
    bench.run()
    assert bench.ran == ["read", "witness", "extra", "end"]


def test_not_applicable_is_recorded_and_remembered(bench: Bench) -> None:
    bench.fail["witness"] = NotApplicable("no inversion")
    run = bench.run()
    assert run.states["witness"].state == "not-applicable"
    assert run.states["extra"].state == "skipped"
    assert run.states["extra"].reason == "needs witness: no inversion"
    assert run.result("end") == "end(None,spectrum(read()))"
    again = bench.run()
    assert bench.ran == []
    assert again.states["witness"].reason == "no inversion"


def test_failed_witness_does_not_stop_the_others_and_is_tried_again(bench: Bench) -> None:
    bench.fail["witness"] = NoGapError("the gap closes")
    run = bench.run()
    assert run.states["witness"].state == "failed"
    assert run.states["witness"].reason == "the gap closes"
    assert run.states["end"].state == "done"
    bench.fail.clear()
    run = bench.run()
    assert run.states["witness"].state == "done"
    assert run.result("end").startswith("end(extra")


def test_our_own_fault_in_a_witness_is_shown_not_hidden(bench: Bench) -> None:
    bench.fail["witness"] = ZeroDivisionError("1/0")
    run = bench.run()
    assert "internal error" in run.states["witness"].reason
    assert run.states["end"].state == "done"


@pytest.mark.parametrize(
    "error",
    [NoGapError("x"), InputError("f", found="a", expected="b", todo="c"), KeyError("x")],
)
def test_essential_task_ends_the_run(bench: Bench, error: Exception) -> None:
    bench.fail["read"] = error
    with pytest.raises(type(error)):
        bench.run()


def test_damaged_file_ends_the_run_wherever_it_is_found(bench: Bench) -> None:
    bench.fail["witness"] = InputError("f", found="a", expected="b", todo="c")
    with pytest.raises(TopovetError):
        bench.run()


def test_killed_run_goes_on_from_finished_tasks(bench: Bench) -> None:
    bench.fail["extra"] = KeyboardInterrupt()
    with pytest.raises(KeyboardInterrupt):
        bench.run()
    bench.fail.clear()
    bench.run()
    assert bench.ran == ["extra", "end"]


def test_result_deleted_between_look_and_use_is_made_again(bench: Bench) -> None:
    bench.run()
    run = bench.run()
    for path in bench.folder.iterdir():
        path.unlink()
    assert run.result("spectrum") == "spectrum(read())"


def test_large_values_are_dropped_after_their_last_use(bench: Bench) -> None:
    run = bench.run()
    assert "read" not in run._memory
    assert run.result("read") == "read()"
