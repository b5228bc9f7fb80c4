"""How often the sky event happens: epochs by year and the intervals between them."""

from __future__ import annotations

from collections.abc import Mapping

import altair as alt
import numpy as np
from numpy.typing import ArrayLike

from epochtest.charts import style
from epochtest.charts.figure import Figure
from epochtest.tables import numbers

_MOST_BARS = 150
_BINS = 40
_YEARS = (1, 2, 5, 10, 20, 50, 100)


def epochs_per_year(per_year: Mapping[str, int] | Mapping[int, int]) -> Figure:
    """Bars of epochs per calendar year; longer spans are put together by several years."""
    title = "Epochs per year"
    table = {int(year): int(count) for year, count in per_year.items()}
    if not table or sum(table.values()) == 0:
        return Figure.saying("No epochs.", kind="epochs", title=title)
    first, last = min(table), max(table)
    width = next((w for w in _YEARS if (last - first + 1) / w <= _MOST_BARS), 500)
    start = first - first % width
    years = np.arange(start, last + 1, width)
    counts = np.zeros(len(years), dtype=np.int64)
    for year, count in table.items():
        counts[(year - start) // width] += count
    word = "year" if width == 1 else f"{width} years"
    data = style.frame(left=years - 0.4 * width, right=years + 0.4 * width, count=counts)
    ends = [float(years[0]) - 0.6 * width, float(years[-1]) + 0.6 * width]
    x = alt.X(
        "left:Q",
        scale=alt.Scale(domain=ends, nice=False, zero=False),
        axis=alt.Axis(
            title="year" if width == 1 else f"{word} from",
            grid=False,
            format="d",
            values=style.whole_ticks(ends[0], ends[1], 9),
            labelExpr=style.NUMBER_LABELS,
        ),
    )
    bars = (
        alt.Chart(data)
        .mark_rect(color=style.GREEN, opacity=style.BAR_OPACITY)
        .encode(
            x=x,
            x2="right",
            y=style.count_axis("count", f"epochs per {word}", counts.max()),
            y2=alt.Y2Datum(0),
        )
    )
    total = sum(table.values())
    caption = (
        f"{numbers.counted(total, 'epoch')}. Even bars mean that the windows sample all parts "
        "of the span alike; the first and last year may be cut by the span."
    )
    words = (
        f"{title}: {numbers.counted(total, 'epoch', plain=True)} from {first} to {last}, "
        f"{counts.min()} to {counts.max()} per {word}."
    )
    chart = style.finished([bars], height_px=230)
    return Figure.of(chart, kind="epochs", title=title, caption=caption, alt=words)


def interval_histogram(interval_days: ArrayLike) -> Figure:
    """Histogram of the days between successive epochs (n,), with their median."""
    title = "Days between successive epochs"
    days = np.asarray(interval_days, dtype=float)
    days = days[np.isfinite(days)]
    if len(days) == 0:
        return Figure.saying(
            "Fewer than two epochs, so no interval.", kind="intervals", title=title
        )
    low, high = float(days.min()), float(days.max())
    if high - low < 1e-6 * max(high, 1.0):
        low, high = low - 0.5, high + 0.5
    counts, edges = np.histogram(days, bins=min(_BINS, max(5, len(days))), range=(low, high))
    gap = 0.04 * (edges[1] - edges[0])
    data = style.frame(left=edges[:-1] + gap, right=edges[1:] - gap, count=counts)
    margin = 0.02 * (high - low)
    x = alt.X(
        "left:Q",
        scale=alt.Scale(domain=[low - margin, high + margin], nice=False, zero=False),
        axis=alt.Axis(title="days", grid=False),
    )
    median = float(np.median(days))
    place = (median - low) / (high - low)
    align = "left" if place < 0.15 else "right" if place > 0.85 else "center"
    layers = [
        alt.Chart(data)
        .mark_rect(color=style.GREEN, opacity=style.BAR_OPACITY)
        .encode(
            x=x,
            x2="right",
            y=style.count_axis("count", "intervals", counts.max()),
            y2=alt.Y2Datum(0),
        ),
        alt.Chart(style.one_row())
        .mark_rule(color=style.INK, strokeWidth=2, strokeDash=list(style.DASHED))
        .encode(x=alt.XDatum(median), y=alt.YValue(-6), y2=alt.Y2Value("height")),
        style.text_at(
            alt.XDatum(median),
            alt.YValue(-15),
            f"median {numbers.days(round(median, 2))} days",
            align=align,
        ),
    ]
    caption = (
        f"{numbers.counted(len(days), 'interval')} from {numbers.days(round(days.min(), 2))} to "
        f"{numbers.days(round(days.max(), 2))} days. A narrow heap means a regular event; "
        "intervals shorter than the window make windows overlap."
    )
    words = (
        f"{title}: {numbers.counted(len(days), 'interval', plain=True)}, "
        f"shortest {days.min():.2f}, median {median:.2f}, longest {days.max():.2f} days."
    )
    chart = style.finished(layers, height_px=260, above_px=20)
    return Figure.of(chart, kind="intervals", title=title, caption=caption, alt=words)
