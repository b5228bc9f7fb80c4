"""Tables of what was found: one row per claim, and the nulls behind each p-value."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import pandas as pd

from epochtest.study.results import CAUTION, ClaimResult
from epochtest.study.sky_results import ForcingResult, RecurrenceResult
from epochtest.tables import numbers
from epochtest.tables.html import NUMERIC, numeric

if TYPE_CHECKING:
    from rich.table import Table

_FINDINGS = (
    "Claim", "Finding", "p", "Rate ratio", "Exact interval", "Inflated interval",
    "Detectable", "Epochs", "Coverage", "Hits / expected",
)  # fmt: skip
_TERMINAL = (
    "Finding", "p", "Rate ratio", "Inflated interval", "Detectable", "Hits / expected",
)  # fmt: skip
_NARROW_TERMINAL = ("Finding", "p", "Rate ratio", "Detectable")
WIDE_TERMINAL = 110
"""Columns of a terminal from which every number fits beside a claim's id."""
_NULLS = (
    "Claim", "Null", "Shifts", "Effective shifts", "Hits", "Mean", "SD", "Inflation", "p",
)  # fmt: skip


def findings_table(results: Sequence[ClaimResult]) -> pd.DataFrame:
    """The top of the report: one row of text per claim, in the order given.

    "p" is the p-value that decided, paid for all claims of the study. The exact interval
    treats earthquakes as independent; the inflated one is widened by the null's own variance.
    "Detectable" pays for the family too: it is the ratio that the decision would have found.
    """
    rows = [
        (
            result.test.claim.title,
            result.finding,
            numbers.p_value(result.family.p_used),
            numbers.ratio(result.test.effect.rate_ratio),
            numbers.interval(result.test.effect.exact_interval),
            numbers.interval(result.test.effect.inflated_interval),
            numbers.ratio(result.test.effect.detectable_ratio_family),
            numbers.count(result.test.n_epochs),
            numbers.percent(result.test.coverage),
            f"{numbers.count(result.test.hits)} / {numbers.decimal(result.test.expected)}",
        )
        for result in results
    ]
    return numeric(pd.DataFrame(rows, columns=list(_FINDINGS), dtype=object), *_FINDINGS[2:])


def nulls_table(results: Sequence[ClaimResult]) -> pd.DataFrame:
    """Every null of every claim: what chance alone gives, and the p-value before adjustment."""
    rows = [
        (
            result.test.claim.title,
            null.name,
            numbers.count(null.shifts),
            numbers.decimal(null.effective_shifts, 0),
            numbers.count(null.observed),
            numbers.decimal(null.mean),
            numbers.decimal(null.sd),
            numbers.ratio(null.inflation),
            numbers.p_value(null.p),
        )
        for result in results
        for null in result.test.nulls
    ]
    return numeric(pd.DataFrame(rows, columns=list(_NULLS), dtype=object), *_NULLS[2:])


def findings_text(results: Sequence[ClaimResult], width: int) -> Table:
    """The findings for a terminal of ``width`` columns, and the caution below them."""
    from rich.table import Table
    from rich.text import Text

    table = Table(caption=CAUTION, caption_justify="left")
    frame = findings_table(results)
    table.add_column("Claim", overflow="fold")
    shown = _TERMINAL if width >= WIDE_TERMINAL else _NARROW_TERMINAL
    for name in shown:
        right = name in frame.attrs[NUMERIC]
        table.add_column(name, justify="right" if right else "left", no_wrap=True)
    for result, row in zip(results, frame[list(shown)].itertuples(index=False), strict=True):
        table.add_row(Text(result.test.claim.id), *(Text(cell) for cell in row))
    return table


def findings_numbers(
    results: Sequence[ClaimResult], sky_results: Sequence[RecurrenceResult | ForcingResult] = ()
) -> pd.DataFrame:
    """The findings as plain numbers for other programs: one row per claim, unbounded is blank."""
    rows: list[dict[str, object]] = []
    for result in results:
        test, effect = result.test, result.test.effect
        rows.append(
            {
                "claim": test.claim.id,
                "kind": test.claim.kind,
                "finding": result.finding,
                "p_used": result.family.p_used,
                "p_maxt": result.family.p_maxt,
                "p_holm": result.family.p_holm,
                **{f"p_{null.name}": null.p for null in test.nulls},
                "p_binomial_for_comparison": test.binomial_p,
                "rate_ratio": effect.rate_ratio,
                "exact_low": effect.exact_interval[0],
                "exact_high": effect.exact_interval[1],
                "inflated_low": effect.inflated_interval[0],
                "inflated_high": effect.inflated_interval[1],
                "detectable_ratio": effect.detectable_ratio,
                "detectable_ratio_family": effect.detectable_ratio_family,
                "earthquakes": test.n_earthquakes,
                "epochs": test.n_epochs,
                "coverage": test.coverage,
                "hits": test.hits,
                "expected": test.expected,
            }
        )
    rows += [
        {"claim": result.claim.id, "kind": result.claim.kind, "finding": result.finding}
        for result in sky_results
    ]
    return pd.DataFrame(rows)
