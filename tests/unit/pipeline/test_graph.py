"""The task graph: order, mistakes, and the graph of a case."""

from __future__ import annotations

import pytest

from topovet.pipeline.catalogue import case_tasks
from topovet.pipeline.graph import build_graph, task_order
from topovet.pipeline.task import Task


def _task(name: str, *needs: str, wants: tuple[str, ...] = ()) -> Task:
    return Task(name, name, lambda **_: name, needs=needs, wants=wants)


def test_every_task_comes_after_those_it_uses() -> None:
    order = [task.name for task in task_order(build_graph(case_tasks()))]
    for task in case_tasks():
        for used in (*task.needs, *task.wants):
            assert order.index(used) < order.index(task.name)


def test_order_is_that_of_declaration_where_free() -> None:
    tasks = [_task("c"), _task("a"), _task("b", "c")]
    assert [t.name for t in task_order(build_graph(tasks))] == ["c", "a", "b"]


@pytest.mark.parametrize(
    ("tasks", "message"),
    [
        ([_task("a"), _task("a")], "two tasks are called 'a'"),
        ([_task("a", "b")], "'a' depends on 'b', which does not exist"),
        ([_task("a", "b"), _task("b", "a")], "circle"),
        ([_task("a", wants=("a",))], "circle"),
    ],
)
def test_mistakes_are_found_when_the_graph_is_built(tasks: list[Task], message: str) -> None:
    with pytest.raises(ValueError, match=message):
        build_graph(tasks)
