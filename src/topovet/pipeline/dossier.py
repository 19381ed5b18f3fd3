"""Vets one case and writes its dossier: verdict.json, report.html, figures, log."""

from __future__ import annotations

import json
import threading
import traceback
from collections.abc import Mapping
from dataclasses import dataclass, replace
from datetime import datetime, timezone
from pathlib import Path
from typing import Any

from topovet.intake.discovery import find_case
from topovet.pipeline.catalogue import case_tasks, result_codec
from topovet.pipeline.graph import build_graph, task_order
from topovet.pipeline.inputs import CaseInput, check_unchanged, find_files, hash_inputs
from topovet.pipeline.runner import Observer, Run
from topovet.pipeline.store import Store, write_atomically
from topovet.report.figures import figure_makers
from topovet.report.html import render_report
from topovet.report.json_document import verdict_json
from topovet.report.material import ReportMaterial, TaskEntry
from topovet.report.plain_page import plain_page
from topovet.spectrum.eigen import one_blas_thread
from topovet.verdict.document import Verdict

DEFAULT_SETTINGS: Mapping[str, Any] = {
    "filling": None,
    "fermi_ev": None,
    "effort": "standard",
    "surface": None,
    "lower_gaps": None,
    "name": None,
    "dimension": None,
    "inversion_centre": None,
    "stated_in": None,
    "spinless": None,
}
"""Options of a run. Where they say something that case.toml also says, they prevail; `stated_in`
names the list that they come from, None for the command line."""


@dataclass(frozen=True, slots=True)
class Dossier:
    """A vetted case.

    Attributes
    ----------
    folder
        Where it was written; None when nothing was.
    verdict
        The conclusion.
    report_html
        The report, as text.
    inputs
        The files that it rests on, as they were hashed.
    """

    folder: Path | None
    verdict: Verdict
    report_html: str
    inputs: tuple[CaseInput, ...] = ()


def start_run(
    case: str | Path,
    *,
    out: Path | None = None,
    settings: Mapping[str, Any] | None = None,
    observe: Observer = lambda event, text: None,
) -> Run:
    """A run over the task graph of a case, not yet executed.

    Raises
    ------
    InputError
        The case folder has no readable Hamiltonian.
    """
    unknown = set(settings or {}) - set(DEFAULT_SETTINGS)
    if unknown:
        raise ValueError(f"unknown settings: {', '.join(sorted(unknown))}")
    settings = {**DEFAULT_SETTINGS, **(settings or {})}
    files = find_files(case, settings["spinless"])
    return Run(
        graph=build_graph(case_tasks()),
        files=files,
        inputs=hash_inputs(files),
        settings=settings,
        store=None if out is None else Store(out / "tasks", result_codec()),
        observe=observe,
    )


def vet_case(
    case: str | Path,
    *,
    out: Path | None = None,
    settings: Mapping[str, Any] | None = None,
    observe: Observer = lambda event, text: None,
) -> Dossier:
    """Vet a case; with `out`, write its dossier and go on from the finished tasks found there.

    Parameters
    ----------
    case
        Case folder, or its Hamiltonian file.
    out
        Dossier folder.
    settings
        Options, see `DEFAULT_SETTINGS`.
    observe
        Hears of progress.

    Raises
    ------
    TopovetError
        The case cannot be vetted, or the dossier cannot be written. Results of finished tasks
        are kept; no verdict is left half-written.
    """
    log = _Log(observe)
    run = start_run(case, out=out, settings=settings, observe=log)
    if out is not None:
        _drop_foreign_verdict(out / "verdict.json", run)
    try:
        # one BLAS thread throughout: with more, sums are cut by the number of processors
        with one_blas_thread():
            run.execute()
            material: ReportMaterial = run.result("report-material")
        check_unchanged(run.files, run.inputs)
        material = replace(material, tasks=task_entries(run))
        figures = _draw(material, log)
        html = _page(material, figures, log)
        if out is not None:
            for name, svg in figures.items():
                write_atomically(out / "figures" / f"{name}.svg", svg.encode())
            write_atomically(out / "report.html", html.encode())
            # the verdict comes last: where it stands, the dossier is whole
            write_atomically(out / "verdict.json", verdict_json(material.verdict).encode())
    except BaseException as error:
        log("log", f"ended by {type(error).__name__}: {error}")
        raise
    finally:
        if out is not None:
            log.append_to(out / "log.txt")
    return Dossier(out, material.verdict, html, run.inputs)


def _page(material: ReportMaterial, figures: Mapping[str, str], log: Observer) -> str:
    """The report; a plain page where it cannot be made, never at the verdict's cost."""
    try:
        return render_report(material, figures)
    except Exception:
        log("log", f"the report could not be made:\n{traceback.format_exc()}")
        return plain_page(material.verdict)


def _draw(material: ReportMaterial, log: Observer) -> dict[str, str]:
    """All figures; one that cannot be drawn is left out and logged, never at the verdict's cost."""
    figures = {}
    for name, make in figure_makers(material).items():
        try:
            figures[name] = make()
        except Exception:
            log("log", f"figure {name} could not be drawn:\n{traceback.format_exc()}")
    return figures


def default_folder(case: str | Path) -> Path:
    """Dossier folder where none is given: NAME-dossier in the current folder."""
    return Path(f"{find_case(case).seedname}-dossier")


def recorded_settings(folder: Path) -> dict[str, Any]:
    """Settings that a dossier was made with; the defaults where it does not say."""
    try:
        document = json.loads((folder / "verdict.json").read_text(encoding="utf-8"))
        recorded = document["provenance"]["settings"]
        return {name: recorded.get(name, value) for name, value in DEFAULT_SETTINGS.items()}
    except (OSError, ValueError, KeyError, TypeError, AttributeError):
        return dict(DEFAULT_SETTINGS)


def task_entries(run: Run) -> tuple[TaskEntry, ...]:
    """The graph with the state of each task, in order, as the report shows it."""
    entries = []
    for task in task_order(run.graph):
        state = run.states.get(task.name)
        entries.append(
            TaskEntry(
                name=task.name,
                needs=(*task.needs, *task.wants),
                # a value that nothing asked for because all its users were recalled
                state="skipped" if state is None else state.state,
                reason="not needed: all that use it were recalled"
                if state is None
                else state.reason,
                seconds=None if state is None else state.seconds,
                about=task.about,
            )
        )
    return tuple(entries)


def _drop_foreign_verdict(path: Path, run: Run) -> None:
    """Remove a verdict on other files or settings: were this run to end early, it would mislead."""
    try:
        old = json.loads(path.read_text(encoding="utf-8"))
        same_files = [entry["sha256"] for entry in old["inputs"]] == [i.sha256 for i in run.inputs]
        if same_files and old["provenance"]["settings"] == run.settings:
            return
    except FileNotFoundError:
        return
    except (OSError, ValueError, KeyError, TypeError):
        pass  # not a whole verdict: no loss
    path.unlink(missing_ok=True)


class _Log:
    """Passes progress on and keeps it, with times, for log.txt."""

    def __init__(self, observe: Observer) -> None:
        self._observe = observe
        self._lines: list[str] = []
        self._lock = threading.Lock()

    def __call__(self, event: str, text: str) -> None:
        if event != "start":
            now = datetime.now(timezone.utc).strftime("%Y-%m-%dT%H:%M:%SZ")
            with self._lock:
                self._lines.append(f"{now} {text}")
        self._observe(event, text)

    def append_to(self, path: Path) -> None:
        """Add the lines of this run to the log; a log that cannot be written stops nothing."""
        try:
            path.parent.mkdir(parents=True, exist_ok=True)
            with path.open("a", encoding="utf-8") as out:
                out.write("\n".join(self._lines) + "\n")
        except OSError as error:
            self._observe("log", f"{path}: cannot be written ({error.strerror})")
