"""The study span at a glance: earthquakes, the largest of them, and the epochs."""

from __future__ import annotations

from typing import Any

import altair as alt
import numpy as np
from numpy.typing import ArrayLike, NDArray

from epochtest.charts import style
from epochtest.charts.figure import Figure
from epochtest.tables import numbers

MOST_TICKS = 150
_LARGEST = 3
_PLOT_PX = 596
_EVEN: dict[str, Any] = {"minExtent": 40}  # both panels keep their axis titles in one line
_YEARS_FROM_DAYS = 4 * 365.25
_UNITS = (("Y", "year", 9000.0), ("M", "month", 300.0), ("D", "day", 0.0))


def calendar_counts(
    times_utc: NDArray[np.datetime64], start: np.datetime64, end: np.datetime64, unit: str
) -> tuple[NDArray[np.datetime64], NDArray[np.int64]]:
    """Edges (n+1,) of whole calendar units over [start, end), and the counts (n,) inside."""
    first = start.astype(f"datetime64[{unit}]")
    last = (end - np.timedelta64(1, "us")).astype(f"datetime64[{unit}]")
    index = (times_utc.astype(f"datetime64[{unit}]") - first).astype(np.int64)
    n = int((last - first).astype(np.int64)) + 1
    edges = (first + np.arange(n + 1)).astype("datetime64[us]")
    return np.clip(edges, start, end), np.bincount(index, minlength=n)


def within(times_utc: ArrayLike, start: np.datetime64, end: np.datetime64) -> NDArray[np.bool_]:
    """Which instants lie in [start, end)."""
    times = np.asarray(times_utc, dtype="datetime64[us]")
    inside: NDArray[np.bool_] = (times >= start) & (times < end)
    return inside


def timeline(
    span_utc: tuple[np.datetime64, np.datetime64],
    epochs_utc: ArrayLike,
    event_times_utc: ArrayLike,
    magnitudes: ArrayLike,
    window_days: tuple[float, float],
) -> Figure:
    """Earthquakes per year, month or day over the span; below them the epochs.

    ``span_utc`` is [start, end); ``epochs_utc`` (m,), ``event_times_utc`` (n,) UTC;
    ``magnitudes`` (n,), NaN where unknown. Up to 150 epochs are ticks with their windows;
    more are counted per calendar unit.
    """
    title = "Earthquakes and epochs over the study span"
    start, end = np.asarray(span_utc, dtype="datetime64[us]")
    times = np.asarray(event_times_utc, dtype="datetime64[us]")
    sizes = np.asarray(magnitudes, dtype=float)
    keep = within(times, start, end)
    times, sizes = times[keep], sizes[keep]
    epochs = np.sort(np.asarray(epochs_utc, dtype="datetime64[us]"))
    epochs = epochs[within(epochs, start, end)]
    if len(times) == 0 and len(epochs) == 0:
        return Figure.saying(
            "No earthquakes and no epochs in the study span.", kind="timeline", title=title
        )
    days = (end - start) / np.timedelta64(1, "D")
    unit, word = next((u, w) for u, w, least in _UNITS if days > least)
    first_ms, last_ms = style.milliseconds([start, end])
    outer = (float(first_ms), float(last_ms))
    upper, largest = _earthquakes(times, sizes, start, end, unit, word, outer)
    many = len(epochs) > MOST_TICKS
    if many:
        coarse = ("Y", "year") if days > _YEARS_FROM_DAYS else (unit, word)
        lower = _epoch_counts(epochs, start, end, *coarse, outer)
    else:
        lower = _epochs(epochs, outer, window_days)
    keys = [style.Key(f"earthquakes per {word}", "bar", style.BLUE, opacity=style.BAR_OPACITY)]
    order = "largest" if len(largest) == 1 else "largest, left to right"
    if largest:
        keys.append(
            style.Key(
                f"{order}: {', '.join(largest)}",
                "point",
                style.VERMILION,
                shape="diamond",
            )
        )
    drawn = style.key_layers(keys, 12)
    charts = alt.vconcat(
        alt.layer(upper, *drawn).properties(width=_PLOT_PX, height=190),
        lower,
        spacing=16,
    ).properties(
        padding={"top": style.EDGE_PX, "left": style.EDGE_PX, "right": 20, "bottom": style.EDGE_PX},
        bounds="flush",
    )
    ends = f"{numbers.days(window_days[0])} to {numbers.days(window_days[1])} days"
    read = (
        f"epochs are counted per {coarse[1]}, as there are too many to draw singly."
        if many
        else f"each tick is one epoch, the shaded strip its window ({ends})."
    )
    caption = (
        f"{numbers.counted(len(times), 'earthquake')} and "
        f"{numbers.counted(len(epochs), 'epoch')} in the span. "
        f"Above, earthquakes per calendar {word} (the first and last may be cut by the span); "
        f"below, {read} Swarms and aftershocks stand out as single high bars: they are "
        "why earthquakes may not be treated as independent."
    )
    words = (
        f"{title}: {numbers.counted(len(times), 'earthquake', plain=True)} and "
        f"{numbers.counted(len(epochs), 'epoch', plain=True)} from "
        f"{start.astype('datetime64[D]')} to {end.astype('datetime64[D]')}; windows of {ends}. "
        + (f"Largest earthquakes: {', '.join(largest)}." if largest else "No earthquakes.")
    )
    return Figure.of(style.themed(charts), kind="timeline", title=title, caption=caption, alt=words)


def _earthquakes(
    times: NDArray[np.datetime64],
    sizes: style.Floats,
    start: np.datetime64,
    end: np.datetime64,
    unit: str,
    word: str,
    outer: tuple[float, float],
) -> tuple[Any, list[str]]:
    edges, counts = calendar_counts(times, start, end, unit)
    ms = style.milliseconds(edges)
    data = style.frame(left=ms[:-1], right=ms[1:], count=counts)
    x = style.time_axis("left", outer[0], outer[1], labels=False)
    y = style.count_axis("count", f"earthquakes per {word}", counts.max(), **_EVEN)
    bars = (
        alt.Chart(data)
        .mark_rect(color=style.BLUE, opacity=style.BAR_OPACITY)
        .encode(x=x, x2="right", y=y, y2=alt.Y2Datum(0))
    )
    if len(times) == 0:
        nothing = style.text_at(alt.XValue(_PLOT_PX / 2), alt.YValue(95), "no earthquakes")
        return bars + nothing, []
    known = np.flatnonzero(np.isfinite(sizes))
    order = known[np.lexsort((times[known], -sizes[known]))][:_LARGEST]
    order = order[np.argsort(times[order], kind="stable")]
    named = [f"M {sizes[i]:.1f} ({times[i].astype('datetime64[D]')})" for i in order]
    marks = (
        alt.Chart(style.frame(left=style.milliseconds(times[order])))
        .mark_point(
            shape="diamond", filled=True, size=90, color=style.VERMILION, opacity=1, clip=False
        )
        .encode(x=x, y=alt.YValue(-6))
    )
    return (bars + marks if len(order) else bars), named


def _epoch_counts(
    epochs: NDArray[np.datetime64],
    start: np.datetime64,
    end: np.datetime64,
    unit: str,
    word: str,
    outer: tuple[float, float],
) -> Any:
    edges, counts = calendar_counts(epochs, start, end, unit)
    ms = style.milliseconds(edges)
    y = style.count_axis("count", ["epochs", f"per {word}"], counts.max(), most_ticks=3, **_EVEN)
    bars = (
        alt.Chart(style.frame(left=ms[:-1], right=ms[1:], count=counts))
        .mark_rect(color=style.GREEN, opacity=style.BAR_OPACITY)
        .encode(x=style.time_axis("left", *outer), x2="right", y=y, y2=alt.Y2Datum(0))
    )
    return bars.properties(width=_PLOT_PX, height=70)


def _epochs(
    epochs: NDArray[np.datetime64],
    outer: tuple[float, float],
    window_days: tuple[float, float],
) -> Any:
    x = style.time_axis("left", outer[0], outer[1])
    if len(epochs) == 0:
        blank = alt.Chart(style.frame(left=list(outer))).mark_rule(opacity=0).encode(x=x)
        words = style.text_at(alt.XValue(_PLOT_PX / 2), alt.YValue(20), "no epochs")
        return (blank + words).properties(width=_PLOT_PX, height=40)
    ms = style.milliseconds(epochs)
    data = style.frame(
        left=ms,
        first=np.clip(ms + window_days[0] * 86400e3, *outer),
        last=np.clip(ms + window_days[1] * 86400e3, *outer),
    )
    strip = (
        alt.Chart(data)
        .mark_rect(color=style.GREEN, opacity=0.35)
        .encode(x=alt.X("first:T"), x2="last", y=alt.YValue(4), y2=alt.Y2Value(30))
    )
    ticks = (
        alt.Chart(data)
        .mark_rule(color=style.GREEN, strokeWidth=1.5)
        .encode(x=x, y=alt.YValue(0), y2=alt.Y2Value(34))
    )
    label = style.text_at(alt.XValue(-8), alt.YValue(17), "epochs", align="right")
    return (strip + ticks + label).properties(width=_PLOT_PX, height=34)
