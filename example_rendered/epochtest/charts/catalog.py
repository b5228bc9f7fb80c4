"""The catalog fit for testing? Sizes and growth with time (the map is in `map`)."""

from __future__ import annotations

from typing import Any

import altair as alt
import numpy as np
from numpy.typing import ArrayLike

from epochtest.charts import style
from epochtest.charts.figure import Figure
from epochtest.study.results import SizeDistribution
from epochtest.tables import numbers

_MOST_STEPS = 400
_MOST_POINTS = 1500


def magnitude_frequency(magnitudes: ArrayLike, sizes: SizeDistribution) -> Figure:
    """Earthquakes per magnitude bin and at or above each magnitude, with Mc and the b-line.

    ``magnitudes`` (n,), NaN where unknown. The line is log10 N(M) = log10 n_above - b (M - Mc)
    (Gutenberg & Richter 1944), drawn from Mc upwards where it was fitted.
    """
    title = "Magnitudes and completeness"
    mag = np.asarray(magnitudes, dtype=float)
    mag = mag[np.isfinite(mag)]
    if len(mag) == 0:
        return Figure.saying("No earthquakes with a magnitude.", kind="sizes", title=title)
    step = sizes.bin_width if sizes.bin_width > 0 else 0.1
    while np.ptp(mag) / step > 300:
        step *= 2
    bins = np.round(mag / step).astype(np.int64)
    single = np.bincount(bins - bins.min())
    at = (bins.min() + np.arange(len(single))) * step
    above = np.cumsum(single[::-1])[::-1]
    room = max(step, 0.3 - np.ptp(at) / 2)
    low, high = float(at[0] - room), float(at[-1] + room)
    x = alt.X(
        "magnitude:Q",
        scale=alt.Scale(domain=[low, high], nice=False, zero=False),
        axis=alt.Axis(title="magnitude", grid=False),
    )
    ceiling = 10.0 ** np.ceil(np.log10(above[0] * 1.2))
    y = alt.Y(
        "count:Q",
        scale=alt.Scale(type="log", domain=[0.7, ceiling], nice=False),
        axis=alt.Axis(
            title="number of earthquakes (log scale)",
            values=[10.0**k for k in range(int(np.log10(ceiling)) + 1)],
            format=",d",
            labelExpr=style.NUMBER_LABELS,
        ),
    )
    some = single > 0
    layers: list[Any] = [
        alt.Chart(style.frame(magnitude=at[some], count=single[some]))
        .mark_point(shape="triangle-up", filled=False, color=style.GREEN, size=45, opacity=1)
        .encode(x=x, y=y),
        alt.Chart(style.frame(magnitude=at, count=above))
        .mark_point(shape="circle", filled=True, color=style.BLUE, size=32, opacity=1)
        .encode(x=x, y=y),
    ]
    keys = [
        style.Key("in the bin", "point", style.GREEN, shape="triangle-up", filled=False),
        style.Key("at or above", "point", style.BLUE, size=45),
    ]
    fitted = sizes.mc is not None and sizes.b is not None and sizes.n_above > 0
    if sizes.mc is not None:
        layers += _completeness(sizes.mc, low, high)
    if fitted:
        assert sizes.mc is not None
        assert sizes.b is not None
        reach = min(high, sizes.mc + np.log10(sizes.n_above / 0.7) / sizes.b)
        ends = np.array([sizes.mc, reach])
        line = style.frame(
            magnitude=ends, count=sizes.n_above * 10 ** (-sizes.b * (ends - ends[0]))
        )
        layers.append(
            alt.Chart(line)
            .mark_line(color=style.VERMILION, strokeWidth=2.5, strokeDash=list(style.DASHED))
            .encode(x=x, y=y)
        )
        keys.append(style.Key(_b_text(sizes), "line", style.VERMILION, style.DASHED, thickness=2.5))
    above_px = 24 if sizes.mc is not None else 0
    caption = (
        f"{numbers.counted(len(mag), 'earthquake')} with magnitude. On this scale a complete "
        "catalog falls on a straight line; where the circles bend away to the left, "
        "small earthquakes are missing from the catalog."
    )
    if sizes.mc is not None:
        caption += " A claim's magnitude floor should not lie left of Mc."
    words = (
        f"{title}. {numbers.counted(len(mag), 'earthquake', plain=True)} "
        f"of magnitude {mag.min():.1f} to {mag.max():.1f}. "
        + (f"Mc {sizes.mc:.1f}, {sizes.n_above} at or above it. " if sizes.mc is not None else "")
        + (_b_text(sizes) if fitted else "No b-value.")
    )
    chart = style.finished(layers, height_px=340, keys=keys, above_px=above_px)
    return Figure.of(chart, kind="sizes", title=title, caption=caption, alt=words)


def cumulative_count(
    times_utc: ArrayLike, span_utc: tuple[np.datetime64, np.datetime64] | None = None
) -> Figure:
    """Running number of earthquakes against the line of a constant rate.

    ``times_utc`` (n,) in any order; without ``span_utc`` the axis runs from first to last.
    """
    title = "Running number of earthquakes"
    times = np.sort(np.asarray(times_utc, dtype="datetime64[us]"))
    times = times[~np.isnat(times)]
    if span_utc is not None:
        start, end = np.asarray(span_utc, dtype="datetime64[us]")
        times = times[(times >= start) & (times < end)]
    if len(times) == 0:
        return Figure.saying("No earthquakes in the span.", kind="cumulative", title=title)
    if span_utc is None:
        start, end = times[0], max(times[-1], times[0] + np.timedelta64(1, "D"))
    n = len(times)
    # Steps at evenly spaced instants and at evenly spaced counts keep both jumps and lulls.
    pick = np.unique(np.linspace(0, n - 1, min(n, _MOST_STEPS)).round().astype(np.int64))
    even = start + (np.linspace(0, 1, _MOST_STEPS // 2) * (end - start).astype(float)).astype(
        "timedelta64[us]"
    )
    at = np.unique(np.concatenate([times[pick], even]))
    running = np.searchsorted(times, at, side="right")
    outer = style.milliseconds([start, end])
    x = style.time_axis("time", float(outer[0]), float(outer[1]))
    y = style.count_axis("count", "earthquakes so far", n)
    layers = [
        alt.Chart(style.frame(time=outer, count=[0, n]))
        .mark_line(color=style.INK, strokeDash=list(style.DASHED), strokeWidth=1.5)
        .encode(x=x, y=y),
        alt.Chart(style.frame(time=style.milliseconds(at), count=running))
        .mark_line(color=style.BLUE, strokeWidth=2.5, interpolate="step-after")
        .encode(x=x, y=y),
    ]
    keys = [
        style.Key("earthquakes", "line", style.BLUE, thickness=2.5),
        style.Key("constant rate", "line", dash=style.DASHED, thickness=1.5),
    ]
    caption = (
        f"{numbers.counted(n, 'earthquake')}. Jumps are aftershock sequences and swarms; a bend "
        "that lasts points to a change in the network or in what the catalog reports, and then "
        "shifts of the epochs over the whole span are not all alike."
    )
    years = (end - start) / np.timedelta64(1, "D") / 365.25
    words = (
        f"{title}: {numbers.counted(n, 'earthquake', plain=True)} from "
        f"{start.astype('datetime64[D]')} to "
        f"{end.astype('datetime64[D]')}, {n / years:.1f} a year on average."
    )
    chart = style.finished(layers, height_px=290, keys=keys)
    return Figure.of(chart, kind="cumulative", title=title, caption=caption, alt=words)


def magnitude_time(times_utc: ArrayLike, magnitudes: ArrayLike) -> Figure:
    """Magnitude against time; more than 1500 earthquakes are counted in cells.

    ``times_utc`` and ``magnitudes`` are (n,); NaT or NaN are left out.
    """
    title = "Magnitude with time"
    times = np.asarray(times_utc, dtype="datetime64[us]")
    mag = np.asarray(magnitudes, dtype=float)
    known = np.isfinite(mag) & ~np.isnat(times)
    ms, mag = style.milliseconds(times[known]), mag[known]
    if len(mag) == 0:
        return Figure.saying("No earthquakes with a magnitude.", kind="history", title=title)
    first, last = float(ms.min()), max(float(ms.max()), float(ms.min()) + 86400e3)
    low, high = np.floor(mag.min() * 2) / 2, np.ceil(mag.max() * 2 + 0.1) / 2
    x = style.time_axis("time", first, last)
    y = alt.Y(
        "magnitude:Q",
        scale=alt.Scale(domain=[float(low), float(high)], nice=False, zero=False),
        axis=alt.Axis(title="magnitude"),
    )
    if len(mag) <= _MOST_POINTS:
        mark = alt.Chart(style.frame(time=ms, magnitude=mag)).mark_point(
            shape="circle", color=style.BLUE, size=22, filled=True, opacity=0.55
        )
        layers, shown = [mark.encode(x=x, y=y)], "Each dot is one earthquake"
    else:
        grid, t_edges, m_edges = np.histogram2d(
            ms,
            mag,
            bins=(90, max(1, min(40, round((high - low) / 0.2)))),
            range=((first, last), (low - 0.05, high - 0.05)),
        )
        i, j = np.nonzero(grid)
        depth = np.log10(grid[i, j]) / max(1.0, np.log10(grid.max()))
        data = style.frame(
            time=(t_edges[i] + t_edges[i + 1]) / 2,
            magnitude=(m_edges[j] + m_edges[j + 1]) / 2,
            opacity=0.6 + 0.4 * depth,
            area=12 + 32 * depth,
        )
        mark = alt.Chart(data).mark_point(shape="square", filled=True, color=style.BLUE)
        layers = [
            mark.encode(
                x=x,
                y=y,
                opacity=alt.Opacity("opacity:Q", scale=None),
                size=alt.Size("area:Q", scale=None),
            )
        ]
        shown = "Each square counts the earthquakes of one cell: the larger and darker, the more"
    caption = (
        f"{numbers.counted(len(mag), 'earthquake')}. {shown}. A lower edge that moves with time "
        "means that the smallest recorded magnitude changed."
    )
    words = (
        f"{title}: {numbers.counted(len(mag), 'earthquake', plain=True)} "
        f"of magnitude {mag.min():.1f} to {mag.max():.1f}."
    )
    chart = style.finished(layers, height_px=300)
    return Figure.of(chart, kind="history", title=title, caption=caption, alt=words)


def _completeness(mc: float, low: float, high: float) -> list[Any]:
    """The rule at Mc with its label above the plot."""
    align = "left" if mc < low + 0.8 * (high - low) else "right"
    rule = alt.Chart(style.one_row()).mark_rule(
        color=style.INK, strokeWidth=1.5, strokeDash=list(style.DOTTED)
    )
    return [
        rule.encode(x=alt.XDatum(mc), y=alt.YValue(-8), y2=alt.Y2Value("height")),
        style.text_at(alt.XDatum(mc), alt.YValue(-16), f"Mc {mc:.1f} (completeness)", align=align),
    ]


def _b_text(sizes: SizeDistribution) -> str:
    error = "" if sizes.b_error is None else f" ± {numbers.decimal(sizes.b_error, 2)}"
    return f"b = {numbers.decimal(sizes.b, 2)}{error}"
