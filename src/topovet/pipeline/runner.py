"""Runs a task graph for one case: what can run runs, what cannot is recorded with its reason.

The key of a task is a hash of its name and version, the contents of the files it reads, the
settings it uses and the keys of the tasks it depends on. A result with the right key is taken from
the store; so a change of one option recomputes only what depends on it, and a run that was killed
goes on from its finished tasks.
"""

from __future__ import annotations

import hashlib
import json
import time
import traceback
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from typing import Any

import networkx as nx

from topovet.errors import InputError, TopovetError
from topovet.intake.records import CaseFiles
from topovet.pipeline.graph import task_order
from topovet.pipeline.inputs import CaseInput, check_unchanged
from topovet.pipeline.store import Store, StoreError
from topovet.pipeline.task import NotApplicable, Task, TaskState

Observer = Callable[[str, str], None]
"""Called with an event ("start", "end" or "log") and a line of text."""


@dataclass(frozen=True, slots=True)
class Context:
    """What a task may look at besides the results it depends on.

    Attributes
    ----------
    files
        Paths of the case's files.
    inputs
        The same files with their hashes.
    settings
        Options by name.
    trail
        States of the tasks that have ended so far; for the tasks that report on the run.
    """

    files: CaseFiles
    inputs: tuple[CaseInput, ...]
    settings: Mapping[str, Any]
    trail: tuple[TaskState, ...] = ()


@dataclass(slots=True)
class Run:
    """One pass over the graph; ask `result` for values, read `states` for what happened.

    Attributes
    ----------
    graph
        From `build_graph`.
    files, inputs
        Paths of the case's files, and their hashes.
    settings
        Options by name; only those a task declares enter its key.
    store
        Where results are kept; None keeps nothing.
    observe
        Hears of progress.
    """

    graph: nx.DiGraph
    files: CaseFiles
    inputs: tuple[CaseInput, ...]
    settings: Mapping[str, Any]
    store: Store | None = None
    observe: Observer = lambda event, text: None
    states: dict[str, TaskState] = field(default_factory=dict)
    _memory: dict[str, Any] = field(default_factory=dict)
    _keys: dict[str, str] = field(default_factory=dict)
    _provisional: set[str] = field(default_factory=set)
    """Tasks that failed, or that were run without what a failed task would have given them."""

    def execute(self) -> None:
        """Run or recall every task, in order.

        Raises
        ------
        TopovetError
            An essential task failed, or a file turned out to be damaged.
        """
        order = task_order(self.graph)
        for i, task in enumerate(order):
            if task.stored:
                self._settle(task)
            self._forget(order[i + 1 :])

    def result(self, name: str) -> Any:
        """Value of a task, or None where it has none."""
        task: Task = self.graph.nodes[name]["task"]
        self._settle(task)
        if name not in self._memory and self.states[name].state == "cached":
            assert self.store is not None
            found, outcome = self.store.load(name, self.key(name))
            if not found:  # deleted or damaged since it was seen: make it again
                del self.states[name]
                self._settle(task)
            else:
                self._memory[name] = outcome["value"]
        return self._memory.get(name)

    def stored_state(self, name: str) -> str:
        """What the store holds for a task, without running anything.

        "memory only" for results that are never stored, "done" or "not-applicable" as it ended,
        "skipped" where something it needs has no result, else "to do".
        """
        task: Task = self.graph.nodes[name]["task"]
        if not task.stored:
            return "memory only"
        outcome: Any = None
        if self.store is not None:
            _, outcome = self.store.load(name, self.key(name))
        if outcome is not None:
            return str(outcome["state"])
        without = ("not-applicable", "skipped")
        return "skipped" if any(self.stored_state(n) in without for n in task.needs) else "to do"

    def key(self, name: str) -> str:
        """Content key of a task (hexadecimal SHA-256)."""
        if name not in self._keys:
            task: Task = self.graph.nodes[name]["task"]
            digests = {entry.role: entry.sha256 for entry in self.inputs}
            parts = {
                "task": name,
                "version": task.version,
                "files": {role: digests.get(role) for role in task.reads},
                "settings": {s: self.settings.get(s) for s in task.settings},
                "uses": {n: self.key(n) for n in self._uses(task)},
            }
            text = json.dumps(parts, sort_keys=True)
            self._keys[name] = hashlib.sha256(text.encode()).hexdigest()
        return self._keys[name]

    def _settle(self, task: Task) -> None:
        """Bring a task to its final state: recalled, run, skipped or failed."""
        if task.name in self.states:
            # a value that was only in memory and has been dropped is made again on demand
            lost = self.states[task.name].state == "done" and task.name not in self._memory
            if not lost:
                return
        if self._recall(task):
            return
        for name in self._uses(task):
            self._settle(self.graph.nodes[name]["task"])
        if self._provisional.intersection(self._uses(task)):
            self._provisional.add(task.name)
        missing = [name for name in task.needs if self.result(name) is None]
        if missing:
            why = "; ".join(f"needs {n}: {self.states[n].reason or 'no result'}" for n in missing)
            self._end(task, "skipped", why)
            return
        self._compute(task)

    def _recall(self, task: Task) -> bool:
        if not task.stored or self.store is None:
            return False
        found, outcome = self.store.load(task.name, self.key(task.name))
        if not found or not isinstance(outcome, dict):
            return False
        if outcome["state"] != "done":
            self._end(task, outcome["state"], outcome["reason"])
        else:
            self._end(task, "cached", "", outcome["seconds"])
        return True

    def _compute(self, task: Task) -> None:
        arguments = {name.replace("-", "_"): self.result(name) for name in self._uses(task)}
        context = Context(self.files, self.inputs, self.settings, tuple(self.states.values()))
        self.observe("start", task.about)
        started = time.perf_counter()
        try:
            value = task.run(context=context, **arguments)
        except NotApplicable as reason:
            self._save(task, "not-applicable", str(reason))
            self._end(task, "not-applicable", str(reason))
            return
        except (InputError, StoreError):
            raise
        except TopovetError as error:
            if task.essential:
                raise
            self._end(task, "failed", str(error))
            return
        except Exception as error:
            if task.essential:
                raise
            # a fault of ours in one witness must not cost the others; it is shown, not hidden
            self.observe("log", traceback.format_exc())
            self._end(task, "failed", f"internal error in this task: {error!r}; see log.txt")
            return
        seconds = time.perf_counter() - started
        self._memory[task.name] = value
        self._save(task, "done", "", value, seconds)
        self._end(task, "done", "", seconds)

    def _save(
        self, task: Task, state: str, reason: str, value: Any = None, seconds: float | None = None
    ) -> None:
        if task.stored and self.store is not None and task.name not in self._provisional:
            # what was read from a file that has changed since must not be kept under its hash
            check_unchanged(self.files, self.inputs)
            outcome = {"state": state, "reason": reason, "value": value, "seconds": seconds}
            self.store.save(task.name, self.key(task.name), outcome)

    def _end(self, task: Task, state: str, reason: str, seconds: float | None = None) -> None:
        self.states[task.name] = TaskState(task.name, state, reason, seconds)
        if state == "failed":
            self._provisional.add(task.name)
        took = f" in {seconds:.2f} s" if state == "done" and seconds is not None else ""
        self.observe("end", f"{task.name}: {state}{took}{f' ({reason})' if reason else ''}")

    def _forget(self, to_come: list[Task]) -> None:
        """Drop large values that no task to come will ask for."""
        wanted = [name for task in to_come if task.stored for name in self._uses(task)]
        needed: set[str] = set()
        while wanted:
            name = wanted.pop()
            if name not in needed:
                needed.add(name)
                task: Task = self.graph.nodes[name]["task"]
                if not task.stored and name not in self._memory:
                    wanted.extend(self._uses(task))
        for name in list(self._memory):
            if not self.graph.nodes[name]["task"].stored and name not in needed:
                del self._memory[name]

    @staticmethod
    def _uses(task: Task) -> tuple[str, ...]:
        return (*task.needs, *task.wants)
