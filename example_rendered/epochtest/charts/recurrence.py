"""How rare a configuration is: its occurrences along the span searched, and its returns."""

from __future__ import annotations

from collections.abc import Sequence
from datetime import date, datetime
from typing import Any

import altair as alt
import numpy as np
from numpy.typing import ArrayLike, NDArray

from epochtest.charts import style
from epochtest.charts.figure import Figure
from epochtest.charts.lineups import dots, whole_axis
from epochtest.tables import numbers
from epochtest.timescale import utc_instant

MOST_TICKS = 300
_PARTS = 150
_LABEL_ROWS, _LABEL_ROW_PX, _LABEL_SHARE = 4, 18, 0.14  # of the plot's width, for one date
_NAMED, _MOST_SENTENCES = 3, 10
_SLACK = np.timedelta64(1, "D")  # ends of a span are often written as dates
_ZERO_UNTIL = 0.6

Instant = np.datetime64 | datetime | date
Instants = NDArray[np.datetime64]


def occurrences_chart(
    title: str,
    times_utc: ArrayLike,
    widths_deg: ArrayLike | None,
    threshold_deg: float | None,
    asserted_utc: Sequence[Instant],
    searched: tuple[Instant, Instant],
) -> Figure:
    """Every occurrence along the whole span searched, with the dates that were asserted.

    ``times_utc`` (n,) UTC; ``widths_deg`` (n,), degrees, the arc that holds the grouping, or
    None for one row of ticks; ``threshold_deg`` the widest arc that counts. ``searched`` is
    (start, end) UTC. More than 1500 points are counted in cells, more than 300 ticks in 150
    equal parts of the span. Times and widths that are NaT or NaN are left out and counted.

    Raises ValueError for arrays that do not match, a span without length, or an occurrence
    more than a day outside it.
    """
    times = np.asarray(times_utc, dtype="datetime64[us]")
    start, end = (utc_instant(instant) for instant in searched)
    if not start < end:
        raise ValueError(f"the span searched runs from {_day(start)} to {_day(end)}; swap them")
    widths = None if widths_deg is None else np.asarray(widths_deg, dtype=float)
    if widths is not None and len(widths) != len(times):
        raise ValueError(f"{len(times)} times and {len(widths)} widths; give one of each")
    keep = ~np.isnat(times) & (True if widths is None else np.isfinite(widths))
    dropped = int(np.sum(~keep))
    times, widths = times[keep], None if widths is None else widths[keep]
    outside = (times < start - _SLACK) | (times > end + _SLACK)
    if outside.any():
        raise ValueError(
            f"the occurrence of {_day(times[outside][0])} lies outside the span searched, "
            f"{_day(start)} to {_day(end)}; give the span that was searched"
        )
    asserted = np.sort(
        np.array([utc_instant(instant) for instant in asserted_utc], "datetime64[us]")
    )
    if len(times) == 0 and len(asserted) == 0:
        nothing = f"No occurrence from {_day(start)} to {_day(end)}."
        return Figure.saying(nothing, kind="occurrences", title=title)

    first, last = (float(ms) for ms in style.milliseconds([start, end]))
    x = style.time_axis("time", first, last)
    ms = np.clip(style.milliseconds(times), first, last)
    if widths is None:
        layers, keys, read, height = _in_a_row(ms, (first, last), x)
    else:
        layers, keys, read, height = _by_width(ms, widths, threshold_deg, (first, last), x)
    inside = (asserted >= start) & (asserted <= end)
    places = (style.milliseconds(asserted[inside]) - first) / (last - first)
    rows = _label_rows(places)
    layers += _asserted(asserted[inside], places, rows, x)
    if inside.any():
        keys.append(style.Key("asserted", "line", style.VERMILION, style.DASHED))

    years = (end - start) / np.timedelta64(1, "D") / 365.25
    said = [f"{numbers.counted(len(times), 'occurrence')} in {numbers.decimal(years)} years."]
    said += [read] if len(times) else []
    said.append("The axis covers the whole span searched, so an empty stretch holds none.")
    if dropped:
        said.append(f"{numbers.counted(dropped, 'row')} without a time or a width left out.")
    near = _nearest(asserted[inside], times)
    said += near[:_NAMED]
    beyond = [
        f"{_day(instant)} was asserted but lies outside the span searched."
        for instant in asserted[~inside]
    ]
    said += beyond[:_NAMED]
    if (rows < 0).any():
        bare = numbers.counted(int(np.sum(rows < 0)), "asserted date")
        said.append(f"{bare} drawn without a label.")
    total = numbers.counted(len(times), "occurrence", plain=True)
    parts = [f"{total} in the span searched, {_day(start)} to {_day(end)}"]
    if len(times):
        parts.append(f"first {_day(times.min())}, last {_day(times.max())}")
    if widths is not None and len(widths):
        parts.append(f"widths {widths.min():.2f} to {widths.max():.2f} degrees")
    if widths is not None and threshold_deg is not None:
        parts.append(f"threshold {threshold_deg:g} degrees")
    parts.append(numbers.counted(len(asserted), "asserted date", plain=True))
    above = 10.0 + _LABEL_ROW_PX * (1 + float(rows.max())) if inside.any() else 0.0
    chart = style.finished(layers, height_px=height + above, keys=keys, above_px=above)
    return Figure.of(
        chart,
        kind="occurrences",
        title=title,
        caption=" ".join(said),
        alt=f"{title}. {'; '.join(parts)}. {' '.join([*near, *beyond][:_MOST_SENTENCES])}".strip(),
    )


def return_intervals_chart(
    intervals_years: ArrayLike,
    asserted_years: float | None,
    tolerance_years: float | None,
    mean_motion_years: float | None,
) -> Figure:
    """Years from each occurrence to the next, in order, against the periods spoken of.

    ``intervals_years`` (n,), NaN left out; ``asserted_years`` with ``tolerance_years`` on either
    side is what was said, ``mean_motion_years`` what the mean motions lead one to expect. More
    than 1500 intervals are counted in cells.
    """
    title = "Years from each occurrence to the next"
    years = np.asarray(intervals_years, dtype=float)
    years = years[np.isfinite(years)]
    n = len(years)
    if n == 0:
        return Figure.saying(
            "Fewer than two occurrences, so no interval.", kind="returns", title=title
        )
    slack = tolerance_years or 0.0
    ends = [float(years.min()), float(years.max())]
    if asserted_years is not None:
        ends += [asserted_years - slack, asserted_years + slack]
    if mean_motion_years is not None:
        ends.append(mean_motion_years)
    bottom, top = min(ends), max(ends)
    from_zero = bottom < _ZERO_UNTIL * top
    margin = max(0.08 * (top - bottom), 0.02 * top, 1e-6)
    domain = (min(0.0, bottom), top + margin) if from_zero else (bottom - margin, top + margin)
    number = np.arange(1, n + 1, dtype=float)
    x = whole_axis("time", "interval number", 0.5 - 0.01 * n, n + 0.5 + 0.01 * n)
    y = alt.Y(
        "value:Q",
        scale=alt.Scale(domain=list(domain), nice=False, zero=False),
        axis=alt.Axis(title="years", labelExpr=style.NUMBER_LABELS),
    )
    layers, keys = _periods(asserted_years, slack, mean_motion_years)
    seen, key, read = dots("interval", number, years, (0.5, n + 0.5), domain, x, y)
    layers.append(seen)
    keys.insert(0, key)
    said = [
        f"{numbers.counted(n, 'interval')}, {numbers.decimal(years.min(), 2)} to "
        f"{numbers.decimal(years.max(), 2)} years, mean {numbers.decimal(years.mean(), 2)}. {read}"
    ]
    words = [
        f"{title}. {numbers.counted(n, 'interval', plain=True)}, shortest {years.min():.2f}, "
        f"mean {years.mean():.2f}, longest {years.max():.2f} years."
    ]
    if asserted_years is not None:
        agree = int(np.sum(np.abs(years - asserted_years) <= slack))
        period = f"{asserted_years:g} ± {slack:g} years"
        said.append(
            f"{numbers.count(agree)} of them lie within the {period} asserted; a regular return "
            "would put all of them there."
        )
        words.append(f"Asserted {period}: {agree} of {n} lie within.")
    if mean_motion_years is not None:
        said.append("The dotted line, from mean motions, holds on average, not for each interval.")
        words.append(f"Mean motions give {mean_motion_years:.2f} years.")
    if not from_zero:
        said.append("The vertical axis does not start at 0.")
    chart = style.finished(layers, height_px=300, keys=keys)
    return Figure.of(
        chart, kind="returns", title=title, caption=" ".join(said), alt=" ".join(words)
    )


def _in_a_row(
    ms: style.Floats, outer: tuple[float, float], x: Any
) -> tuple[list[Any], list[style.Key], str, float]:
    """Layers, key, how to read them and height: ticks, or counts if they would run together."""
    if len(ms) <= MOST_TICKS:
        data = style.frame(time=ms if len(ms) else list(outer))
        ticks = alt.Chart(data).mark_rule(
            color=style.BLUE, strokeWidth=1.5, opacity=1 if len(ms) else 0
        )
        layer = ticks.encode(x=x, y=alt.YValue(8), y2=alt.Y2Value("height"))
        return [layer], [style.Key("occurrence", "bar", style.BLUE)], "Each tick is one.", 110.0
    counts, edges = np.histogram(ms, bins=_PARTS, range=outer)
    y = style.count_axis("count", "occurrences", float(counts.max()), most_ticks=4)
    bars = alt.Chart(style.frame(time=edges[:-1], right=edges[1:], count=counts)).mark_rect(
        color=style.BLUE, opacity=style.BAR_OPACITY
    )
    part = (outer[1] - outer[0]) / _PARTS / 365.25 / 86400e3
    read = f"Each bar counts those of {numbers.decimal(part, 2)} years."
    key = style.Key("occurrences", "bar", style.BLUE, opacity=style.BAR_OPACITY)
    return [bars.encode(x=x, x2="right", y=y, y2=alt.Y2Datum(0))], [key], read, 220.0


def _by_width(
    ms: style.Floats,
    widths: style.Floats,
    threshold_deg: float | None,
    outer: tuple[float, float],
    x: Any,
) -> tuple[list[Any], list[style.Key], str, float]:
    """Layers, key, how to read them and height: points at the width of the grouping."""
    limits = [] if threshold_deg is None else [threshold_deg]
    top = 1.06 * max([*limits, float(widths.max(initial=0.0)), 1e-3])
    y = alt.Y(
        "value:Q",
        scale=alt.Scale(domain=[0.0, top], nice=False),
        axis=alt.Axis(title="width of the grouping (degrees)"),
    )
    keys, layers = [], []
    if threshold_deg is not None:
        layers.append(_across(threshold_deg, style.INK, style.DASHED))
        label = f"threshold {numbers.days(threshold_deg)}°"
        keys.append(style.Key(label, "line", dash=style.DASHED))
    seen, key, read = dots("occurrence", ms, widths, outer, (0.0, top), x, y)
    read += " The lower, the closer the bodies come."
    return [seen, *layers], [key, *keys], read, 310.0


def _label_rows(places: style.Floats) -> NDArray[np.int64]:
    """Row above the plot (0 the lowest) of labels that begin at rising ``places``; -1: no room.

    A label stands at the right of its rule and above all later labels that it would run into,
    so that no rule crosses a label::

        | 1962-02-05
        |  | 1970-01-01      | 2000-05-05
    """
    rows = np.full(len(places), -1, dtype=np.int64)
    for k in range(len(places) - 1, -1, -1):
        later = rows[k + 1 :][places[k + 1 :] < places[k] + _LABEL_SHARE]
        row = int(later.max(initial=-1)) + 1
        rows[k] = row if row < _LABEL_ROWS else -1
    return rows


def _asserted(
    instants: Instants, places: style.Floats, rows: NDArray[np.int64], x: Any
) -> list[Any]:
    """Dashed rules at asserted dates, each up to its label."""
    flip = np.zeros(len(places), dtype=bool)  # the last label, if it would leave the plot
    if len(places) and not (places[:-1] > places[-1] - 2 * _LABEL_SHARE).any():
        flip[-1] = places[-1] > 1.0 - _LABEL_SHARE
    layers = []
    for row, right in sorted(set(zip(rows.tolist(), flip.tolist(), strict=True))):
        here = instants[(rows == row) & (flip == right)]
        top = -_LABEL_ROW_PX * float(row + 1)
        data = alt.Chart(style.frame(time=style.milliseconds(here), text=[_day(t) for t in here]))
        rule = data.mark_rule(color=style.VERMILION, strokeWidth=2, strokeDash=list(style.DASHED))
        layers.append(rule.encode(x=x, y=alt.YValue(top), y2=alt.Y2Value("height")))
        if row >= 0:
            label = data.mark_text(
                align="right" if right else "left", baseline="middle", dx=-5 if right else 5,
                fontSize=style.LABEL_PX, color=style.INK,
            )  # fmt: skip
            layers.append(label.encode(x=x, y=alt.YValue(top + 8), text="text:N"))
    return layers


def _periods(
    asserted: float | None, slack: float, mean_motion: float | None
) -> tuple[list[Any], list[style.Key]]:
    """Rules and bands across the plot for the period asserted and the one expected."""
    layers, keys = [], []
    if asserted is not None:
        band = alt.Chart(style.one_row()).mark_rect(
            color=style.VERMILION, opacity=style.BAND_OPACITY
        )
        low, high = alt.YDatum(asserted - slack), alt.Y2Datum(asserted + slack)
        layers.append(band.encode(y=low, y2=high, x=alt.XValue(0), x2=alt.X2Value("width")))
        layers.append(_across(asserted, style.VERMILION, style.DASHED))
        label = f"asserted {asserted:g} ± {slack:g}"
        keys.append(style.Key(label, "line", style.VERMILION, style.DASHED))
    if mean_motion is not None:
        layers.append(_across(mean_motion, style.INK, style.DOTTED))
        label = f"from mean motions {numbers.decimal(mean_motion, 2)}"
        keys.append(style.Key(label, "line", dash=style.DOTTED))
    return layers, keys


def _across(value: float, colour: str, dash: tuple[int, ...]) -> Any:
    """A rule across the plot at a height."""
    rule = alt.Chart(style.one_row()).mark_rule(color=colour, strokeWidth=2, strokeDash=list(dash))
    return rule.encode(y=alt.YDatum(value), x=alt.XValue(0), x2=alt.X2Value("width"))


def _nearest(asserted: Instants, times: Instants) -> list[str]:
    """For each asserted date, how far the nearest occurrence is, in a sentence."""
    if len(times) == 0:
        return [f"Asserted {_day(instant)}: no occurrence in the span." for instant in asserted]
    near = [times[np.argmin(np.abs(times - instant))] for instant in asserted[:_MOST_SENTENCES]]
    said = []
    for instant, other in zip(asserted, near, strict=False):
        days = abs((other - instant) / np.timedelta64(1, "D"))
        value, unit = (days, "days") if days < 731 else (days / 365.25, "years")
        apart = f"{numbers.decimal(value)} {unit}"
        said.append(f"Nearest to the asserted {_day(instant)}: {_day(other)}, {apart} away.")
    return said


def _day(instant: Any) -> str:
    return str(np.datetime64(instant, "D"))
