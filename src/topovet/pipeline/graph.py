"""The task graph: built and checked with networkx, in one reproducible order."""

from __future__ import annotations

from collections.abc import Iterable

import networkx as nx

from topovet.pipeline.task import Task


def build_graph(tasks: Iterable[Task]) -> nx.DiGraph:
    """Directed graph with an edge from each task to those that use its result.

    Nodes carry the `Task` as attribute "task"; edges carry "hard" (needed or only wanted).

    Raises
    ------
    ValueError
        Two tasks share a name, a dependence does not exist, or the tasks form a circle: mistakes
        of the programmer, found when the graph is built.
    """
    graph = nx.DiGraph()
    for task in tasks:
        if task.name in graph:
            raise ValueError(f"two tasks are called {task.name!r}")
        graph.add_node(task.name, task=task)
    for name in list(graph):
        task = graph.nodes[name]["task"]
        for source, hard in [(n, True) for n in task.needs] + [(n, False) for n in task.wants]:
            if source not in graph:
                raise ValueError(f"task {name!r} depends on {source!r}, which does not exist")
            graph.add_edge(source, name, hard=hard)
    if not nx.is_directed_acyclic_graph(graph):
        circle = " -> ".join(edge[0] for edge in nx.find_cycle(graph))
        raise ValueError(f"the tasks form a circle: {circle}")
    return graph


def task_order(graph: nx.DiGraph) -> list[Task]:
    """All tasks, each after those it depends on; ties in the order in which they were declared."""
    rank = {name: i for i, name in enumerate(graph)}
    names = nx.lexicographical_topological_sort(graph, key=rank.__getitem__)
    return [graph.nodes[name]["task"] for name in names]
