"""Running a plan: skip what is made, run the rest side by side, say what happened.

Workers are processes started afresh, since papermill changes the working folder and kernels
inherit the environment. Errors come back as values, so that one failing claim does not stop
the others.
"""

from __future__ import annotations

import multiprocessing
import os
import shutil
from collections.abc import Callable
from concurrent.futures import FIRST_COMPLETED, Future, ProcessPoolExecutor, wait
from concurrent.futures.process import BrokenProcessPool
from dataclasses import dataclass, field
from pathlib import Path
from typing import Annotated, Literal

from pydantic import Field, TypeAdapter

from epochtest.errors import EpochtestError, NotebookError
from epochtest.pipeline.parameters import checked
from epochtest.pipeline.plan import REPORT, Plan, Step
from epochtest.pipeline.store import NOTEBOOK, Slot, Store
from epochtest.study.claims import Claim
from epochtest.study.load import LoadedStudy
from epochtest.study.results import ClaimResult
from epochtest.study.sky_results import ForcingResult, RecurrenceResult

_RESULT: TypeAdapter[ClaimResult | RecurrenceResult | ForcingResult] = TypeAdapter(
    Annotated[ClaimResult | RecurrenceResult | ForcingResult, Field(discriminator="schema_version")]
)

Event = Literal["total", "skipped", "started", "made", "failed", "blocked"]
Listener = Callable[[str, Event, str], None]


@dataclass
class Outcome:
    """What a run did, by step name."""

    made: list[str] = field(default_factory=list)
    skipped: list[str] = field(default_factory=list)
    failed: dict[str, str] = field(default_factory=dict)
    blocked: list[str] = field(default_factory=list)
    reported: bool = False


def make(step: Step, root: Path) -> EpochtestError | None:
    """Make one artifact in this process; the error as a value if it cannot be made."""
    from epochtest.pipeline.execute import execute

    store = Store(root)
    notebook = root / "notebooks" / f"{step.notebook}.ipynb"
    try:
        parameters = checked(notebook, step.parameters)
        folder = store.begin(step.slot)
        execute(notebook, folder / NOTEBOOK, parameters, root)
        if step.notebook == REPORT:
            from epochtest.pipeline.html import write_report

            write_report(folder / NOTEBOOK, folder / "report.html")
        store.publish(step.slot, step.ingredients)
        store.forget_failed(step.slot)
    except NotebookError as error:
        kept = store.keep_failed(step.slot)
        where = f" Kept as {kept.relative_to(root).as_posix()}." if kept else ""
        trace = f"\n{error.facts['trace']}" if error.facts.get("trace") else ""
        return NotebookError(f"{error.message.rstrip('.')}.{where}{trace}", **error.facts)
    except EpochtestError as error:
        return error
    except OSError as error:
        return NotebookError(f"{step.notebook}: {error.strerror}: {error.filename}.", cell=None)
    return None


def run(
    study: LoadedStudy,
    claims: tuple[Claim, ...] | None = None,
    workers: int | None = None,
    listen: Listener = lambda name, event, detail: None,
) -> Outcome:
    """Bring the study's artifacts up to date.

    ``claims`` limits the run to the tests of those claims; the report then follows only if
    every other claim's artifacts are made too. ``listen(step, event, detail)`` hears of every
    change. Raises BusyError if another run holds the study, ChangedInputError and
    ProtocolError before anything is started.
    """
    store = Store(study.root)
    plan = Plan(study)
    steps = plan.steps(claims)
    if claims is not None:
        rest = [step for step in plan.steps() if step not in steps and step.notebook != REPORT]
        if all(store.is_made(step.slot) for step in rest):
            steps = plan.steps()
    for step in steps:
        checked(study.root / "notebooks" / f"{step.notebook}.ipynb", step.parameters)
    with store.lock():
        store.clear_partial()
        outcome = _work_through(steps, store, workers or os.cpu_count() or 1, listen)
        store.clear_partial()
        done = [step.slot for step in steps if step.name in outcome.made + outcome.skipped]
        store.write_current(_with_known(store, plan, done))
        if plan.report.name in outcome.made + outcome.skipped:
            _lay_out(store, plan)
            outcome.reported = True
            store.remove_unused(done)
    return outcome


def _with_known(store: Store, plan: Plan, done: list[Slot]) -> list[Slot]:
    """The artifacts of this run and those of other steps that still hold."""
    names = {slot.step for slot in done}
    others = [s.slot for s in plan.steps() if s.name not in names and store.is_made(s.slot)]
    return done + others


def _work_through(steps: list[Step], store: Store, workers: int, listen: Listener) -> Outcome:
    outcome = Outcome()
    waiting: list[Step] = []
    listen("", "total", str(len(steps)))
    for step in steps:
        if store.is_made(step.slot):
            outcome.skipped.append(step.name)
            listen(step.name, "skipped", "")
        else:
            waiting.append(step)
    if not waiting:
        return outcome
    ready = set(outcome.skipped)
    context = multiprocessing.get_context("spawn")
    with ProcessPoolExecutor(min(workers, len(waiting)), mp_context=context) as pool:
        running: dict[Future[EpochtestError | None], Step] = {}
        while waiting or running:
            for step in [step for step in waiting if set(step.needs) <= ready]:
                waiting.remove(step)
                listen(step.name, "started", "")
                running[pool.submit(make, step, store.root)] = step
            if not running:
                break
            finished, _ = wait(running, return_when=FIRST_COMPLETED)
            for future in finished:
                step = running.pop(future)
                try:
                    error = future.result()
                except BrokenProcessPool:
                    error = NotebookError("the worker process was killed; run again", cell=None)
                    waiting.clear()
                if error is None:
                    ready.add(step.name)
                    outcome.made.append(step.name)
                    listen(step.name, "made", "")
                else:
                    outcome.failed[step.name] = str(error)
                    listen(step.name, "failed", str(error))
    for step in steps:
        if step.name not in ready and step.name not in outcome.failed:
            outcome.blocked.append(step.name)
            listen(step.name, "blocked", "")
    return outcome


def _lay_out(store: Store, plan: Plan) -> None:
    """Copy the report and the results of the newest 4_report to where people look."""
    artifact = store.root / plan.report.slot.folder
    results = store.runs / "results"
    wanted = {f"{claim.id}.json" for claim in plan.study.claims}
    results.mkdir(parents=True, exist_ok=True)
    for stale in results.glob("*.json"):
        if stale.name not in wanted:
            stale.unlink()
    for source, target in (
        (artifact / "report.html", store.runs / "report.html"),
        (artifact / "findings.csv", store.runs / "findings.csv"),
        *((artifact / "results" / name, results / name) for name in sorted(wanted)),
    ):
        partial = target.with_name(f".{target.name}.partial")
        shutil.copyfile(source, partial)
        os.replace(partial, target)


def claim_results(
    root: Path,
) -> tuple[list[ClaimResult], list[RecurrenceResult | ForcingResult]]:
    """The claims of the newest report, by id: the tested ones, and those about the sky alone."""
    tested: list[ClaimResult] = []
    sky: list[RecurrenceResult | ForcingResult] = []
    for path in sorted((root / "runs" / "results").glob("*.json")):
        result = _RESULT.validate_json(path.read_text(encoding="utf-8"))
        if isinstance(result, ClaimResult):
            tested.append(result)
        else:
            sky.append(result)
    return tested, sky
