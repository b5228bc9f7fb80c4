"""``check``: everything is read and opened, what each claim will do is said, no outcome is seen.

Shown per claim: its event in words, the number of epochs, the coverage of its windows and the
number of earthquakes that its selection admits over the whole span. How many of them lie in
windows is an outcome and is not computed here.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from functools import partial
from typing import TypeVar

from epochtest.errors import EpochtestError
from epochtest.inference.windows import span_instants
from epochtest.pipeline.catalog_step import CatalogStep, catalog_of
from epochtest.pipeline.epochs_step import epochs_of
from epochtest.pipeline.parameters import PARAMETERS, declared_names
from epochtest.pipeline.superposed_step import floor_below_completeness, selected_earthquakes
from epochtest.sky.ephemeris import open_ephemeris
from epochtest.sky.events import search_span
from epochtest.study.claims import ForcingClaim, RecurrenceClaim, TimingClaim
from epochtest.study.load import LoadedStudy
from epochtest.study.words import described
from epochtest.tables import numbers
from epochtest.tables.protocol import (
    assertion_in_words,
    place_in_words,
    recurrence_in_words,
    selection_in_words,
    window_in_words,
)

Found = TypeVar("Found")


@dataclass
class CheckReport:
    """Lines to print; ``faults`` stop a run, ``warnings`` do not."""

    lines: list[str] = field(default_factory=list)
    warnings: list[str] = field(default_factory=list)
    faults: list[str] = field(default_factory=list)


def check_study(study: LoadedStudy) -> CheckReport:
    """Look at every input of ``study`` and at no outcome."""
    report = CheckReport()
    settings = study.settings
    report.lines.append(
        f"{settings.about.title}: {settings.span.start} to {settings.span.end} UTC, "
        f"{settings.ephemeris.kernel}, alpha {settings.inference.alpha:g}, "
        f"correction {settings.inference.correction}, {len(study.claims)} claims."
    )
    for stem in PARAMETERS:
        path = study.root / "notebooks" / f"{stem}.ipynb"
        if not path.is_file():
            report.faults.append(f"notebooks/{path.name}: the notebook is missing; restore it.")
        else:
            _guarded(report, partial(declared_names, path))
    catalog = _guarded(report, lambda: catalog_of(study))
    if isinstance(catalog, CatalogStep):
        _describe_catalog(report, catalog)
    for claim in study.claims:
        match claim:
            case TimingClaim():
                _describe_timing(report, study, claim, catalog)
            case RecurrenceClaim():
                _describe_recurrence(report, study, claim)
            case ForcingClaim():
                _describe_forcing(report, study, claim, catalog)
    return report


def _guarded(report: CheckReport, work: Callable[[], Found]) -> Found | None:
    """The result of ``work``, or None with its fault noted."""
    try:
        return work()
    except EpochtestError as error:
        report.faults.append(str(error))
        return None


def _describe_catalog(report: CheckReport, catalog: CatalogStep) -> None:
    result = catalog.result
    mc = "unknown" if result.sizes.mc is None else f"{result.sizes.mc:.2f}"
    report.lines.append(
        f"Catalog: {numbers.count(result.rows_read)} rows read = "
        f"{numbers.count(result.kept)} kept + {numbers.count(result.quarantined)} set aside; "
        f"{numbers.count(result.in_span)} in the span; completeness about {mc}."
    )
    report.warnings.extend(result.notes)


def _describe_timing(
    report: CheckReport, study: LoadedStudy, claim: TimingClaim, catalog: CatalogStep | None
) -> None:
    step = _guarded(report, lambda: epochs_of(study, claim))
    if step is None:
        return
    result = step.result
    report.lines += [
        f"{claim.id}: {claim.title}",
        f"  event      {result.description}",
        f"  window     {window_in_words(claim.window_days)}, direction {claim.direction}",
        f"  epochs     {numbers.count(result.n_epochs)} "
        f"({result.overlapping_windows} windows overlap the one before)",
        f"  coverage   {numbers.percent(result.coverage)} of the span",
    ]
    report.warnings += [f"{claim.id}: {note}" for note in result.notes]
    if result.n_epochs < claim.minimum.epochs:
        report.warnings.append(
            f"{claim.id}: {result.n_epochs} epochs are fewer than its own minimum of "
            f"{claim.minimum.epochs}; the finding will be 'cannot tell'."
        )
    selected = _describe_selection(report, study, claim, catalog)
    if selected is not None and selected < claim.minimum.earthquakes:
        report.warnings.append(
            f"{claim.id}: {selected} earthquakes are fewer than its own minimum of "
            f"{claim.minimum.earthquakes}; the finding will be 'cannot tell'."
        )
    if catalog is None:
        return
    if (incomplete := floor_below_completeness(study, claim, catalog)) is not None:
        report.warnings.append(f"{claim.id}: its {incomplete}.")


def _describe_selection(
    report: CheckReport,
    study: LoadedStudy,
    claim: TimingClaim | ForcingClaim,
    catalog: CatalogStep | None,
) -> int | None:
    """Say which earthquakes count, over the whole span; how many, or None if it cannot be told."""
    report.lines.append(f"  selection  {selection_in_words(study.selection_of(claim))}")
    if catalog is None:
        return None
    selected = _guarded(report, lambda: selected_earthquakes(study, claim, catalog.kept))
    if selected is None:
        return None
    report.lines.append(f"  selected   {numbers.count(len(selected))} earthquakes in the span")
    return len(selected)


def _describe_recurrence(report: CheckReport, study: LoadedStudy, claim: RecurrenceClaim) -> None:
    kernel = study.settings.ephemeris.kernel
    report.lines += [
        f"{claim.id}: {claim.title}",
        f"  event      {described(claim.event, kernel)}",
        f"  asserts    {'; '.join(recurrence_in_words(claim.recurrence))}",
        f"  searches   the whole span of {kernel}; looks at no earthquake",
    ]


def _describe_forcing(
    report: CheckReport, study: LoadedStudy, claim: ForcingClaim, catalog: CatalogStep | None
) -> None:
    ephemeris = open_ephemeris(study.settings.ephemeris.kernel)
    _guarded(report, lambda: search_span(ephemeris, *span_instants(claim.span)))
    report.lines += [
        f"{claim.id}: {claim.title}",
        f"  place      {place_in_words(claim.place)}, {claim.span.start} to {claim.span.end}",
        f"  asserts    {assertion_in_words(claim.asserts)}",
    ]
    _describe_selection(report, study, claim, catalog)
