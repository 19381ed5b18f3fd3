"""A screen: finds the cases, leaves out those that are up to date, runs the others."""

from __future__ import annotations

import time
from collections.abc import Callable
from contextlib import closing
from dataclasses import dataclass, replace
from pathlib import Path

from topovet.errors import TopovetError
from topovet.pipeline.store import StoreError, write_atomically
from topovet.screening.cases import FoundCases, find_cases
from topovet.screening.code_digest import code_digest
from topovet.screening.dossier_state import recorded_outcome
from topovet.screening.engine import run_cases
from topovet.screening.failures import record_failure
from topovet.screening.journal import Journal, log_path, step_text
from topovet.screening.local_pool import LocalPool
from topovet.screening.machine import available_memory, processors
from topovet.screening.memory import estimate
from topovet.screening.pool import Pool
from topovet.screening.progress import Progress
from topovet.screening.records import Job, Outcome, ScreenCase, ScreenResult, Step
from topovet.screening.shards import Shard, cases_of
from topovet.screening.stopping import Stopped
from topovet.screening.summary import summary_lines

USABLE_MEMORY = 0.9
"""Part of the free memory that workers may take; estimates are no promises."""

Observer = Callable[[Step], None]


@dataclass(frozen=True, slots=True)
class Plan:
    """How a screen is to run.

    Attributes
    ----------
    root
        Folder with cases below it, or a list of cases.
    out
        Folder for the dossiers.
    effort
        "quick", "standard" or "thorough".
    workers
        Local processes; None for one to a processor.
    dask
        Address or scheduler file of a Dask scheduler, instead of local processes.
    shard
        The part of the cases to do; None for all.
    fresh
        Whether to compute everything anew.
    limit_s
        Wall time in seconds after which a case is given up; None for never.
    """

    root: Path
    out: Path
    effort: str = "standard"
    workers: int | None = None
    dask: str | None = None
    shard: Shard | None = None
    fresh: bool = False
    limit_s: float | None = None


def screen(plan: Plan, *, observe: Observer = lambda step: None) -> ScreenResult:
    """Vet all cases of a plan, each into its own dossier.

    A case that fails never stops the others. Interrupted at any moment, a screen is taken up by
    running it again: the dossiers are the only memory it has.

    Parameters
    ----------
    plan
        What to do.
    observe
        Hears of each case when it has ended.

    Raises
    ------
    InputError
        There are no cases, or their list has an error.
    ScreenError
        The dossiers cannot be written.
    """
    started = time.monotonic()
    found = find_cases(plan.root, out=plan.out, settings={"effort": plan.effort})
    cases = found.cases if plan.shard is None else cases_of(plan.shard, found.cases)
    plan = replace(plan, out=plan.out.absolute())
    _check_writable(plan.out)
    journal = Journal(log_path(plan.out, plan.shard))
    outcomes = {} if plan.fresh else _up_to_date(plan, cases)
    todo = [_weighed(case) for case in cases if case.slug not in outcomes]
    try:
        if todo:
            _run(plan, todo, outcomes, journal, observe, found)
        else:
            journal(f"screen of {plan.root}: {len(cases)} cases, all of them up to date")
    except BaseException as error:
        why = str(error) if isinstance(error, Stopped) else f"{type(error).__name__}: {error}"
        journal(f"stopped by {why}; run it again to go on")
        raise
    result = ScreenResult(
        folder=plan.out,
        outcomes=tuple(outcomes[case.slug] for case in cases),
        seconds=time.monotonic() - started,
        notes=found.notes + ((journal.broken,) if journal.broken else ()),
        names={case.slug: case.name for case in cases},
    )
    for line in summary_lines(result):
        journal(line)
    return result


def _run(
    plan: Plan,
    todo: list[ScreenCase],
    outcomes: dict[str, Outcome],
    journal: Journal,
    observe: Observer,
    found: FoundCases,
) -> None:
    progress = Progress(todo, len(outcomes))

    def settle(case: ScreenCase, outcome: Outcome, unrecorded: bool) -> None:
        if unrecorded:
            _record(plan, case, outcome, journal)
        outcomes[case.slug] = outcome
        step = progress.step(case, outcome)
        journal(step_text(step))
        observe(step)

    def make_job(case: ScreenCase, heed_claims: bool) -> Job:
        return Job(
            slug=case.slug,
            name=case.name,
            path=case.path,
            folder=str(plan.out / case.slug),
            settings=case.settings,
            fresh=plan.fresh,
            heed_claims=heed_claims,
            code="" if plan.dask is None else code_digest(),
            limit_s=plan.limit_s,
        )

    with closing(_pool(plan, len(todo))) as pool:
        part = "" if plan.shard is None else f", shard {plan.shard}"
        journal(
            f"screen of {plan.root}{part}: {len(todo)} cases to vet, {len(outcomes)} up to date; "
            f"{pool.about}"
        )
        for note in found.notes:
            journal(note)
        run_cases(todo, pool, make_job, settle)


def _pool(plan: Plan, n_cases: int) -> Pool:
    if plan.dask is not None:
        from topovet.screening.dask_pool import DaskPool

        return DaskPool(plan.dask)
    memory = available_memory()
    workers = min(processors() if plan.workers is None else plan.workers, n_cases)
    return LocalPool(workers, None if memory is None else int(USABLE_MEMORY * memory))


def _up_to_date(plan: Plan, cases: tuple[ScreenCase, ...]) -> dict[str, Outcome]:
    known = {}
    for case in cases:
        outcome = recorded_outcome(
            case.slug,
            plan.out / case.slug,
            case.path,
            settings=case.settings,
            code=code_digest(),
        )
        if outcome is not None:
            known[case.slug] = outcome
    return known


def _weighed(case: ScreenCase) -> ScreenCase:
    size, memory = estimate(case.path)
    return replace(case, size_bytes=size, memory_bytes=memory)


def _record(plan: Plan, case: ScreenCase, outcome: Outcome, journal: Journal) -> None:
    try:
        record_failure(plan.out / case.slug, name=case.name, path=case.path, outcome=outcome)
    except StoreError as error:
        journal(str(error))


def _check_writable(out: Path) -> None:
    """Find out before hours of work whether results can be kept."""
    probe = out / ".writable"
    try:
        write_atomically(probe, b"")
        probe.unlink(missing_ok=True)  # another screen may be trying too
    except OSError as error:
        raise TopovetError(f"{probe}: cannot be removed ({error.strerror}).") from error
