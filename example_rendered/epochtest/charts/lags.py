"""Counts by lag around the epochs, against what chance alone gives (Chree 1912, 1913)."""

from __future__ import annotations

import altair as alt
import numpy as np
from numpy.typing import ArrayLike

from epochtest.charts import style
from epochtest.charts.figure import Figure
from epochtest.tables import numbers

MOST_BINS = 1000
_BARS_UNTIL = 0.6


def lag_chart(
    title: str,
    *,
    edges_days: ArrayLike,
    counts: ArrayLike,
    mean: ArrayLike,
    pointwise: tuple[ArrayLike, ArrayLike],
    simultaneous: tuple[ArrayLike, ArrayLike] | None,
    window_days: tuple[float, float],
    n_epochs: int,
    level: float = 0.95,
) -> Figure:
    """Counts in n bins of lag with the null's bands and the claim's window.

    ``edges_days`` is (n+1,); ``counts`` and ``mean`` are (n,); ``pointwise`` and
    ``simultaneous`` are (low, high), each (n,) or a scalar: the first holds each bin at
    ``level`` by itself, the second all bins together. Bars start at 0; where the null's band
    lies so high that bars would hide the differences, a step line on an axis that starts
    above 0 takes their place, and the caption says so.

    Raises ValueError for arrays that do not match or for more than 1000 bins.
    """
    edges = np.asarray(edges_days, dtype=float)
    seen = np.asarray(counts, dtype=float)
    n = len(seen)
    if n and len(edges) != n + 1:
        raise ValueError(f"{n} counts need {n + 1} edges, found {len(edges)}")
    if n > MOST_BINS:
        raise ValueError(f"{n} lag bins are more than a chart can show ({MOST_BINS}); widen them")
    if n == 0 or n_epochs == 0 or seen.sum() == 0:
        nothing = "No epochs, so no lags." if n_epochs == 0 else "No earthquakes at these lags."
        return Figure.saying(nothing, kind="lags", title=title)
    low, high = (np.broadcast_to(np.asarray(b, dtype=float), n) for b in pointwise)
    expected = np.broadcast_to(np.asarray(mean, dtype=float), n)
    limits = None
    if simultaneous is not None:
        limits = [np.broadcast_to(np.asarray(b, dtype=float), n) for b in simultaneous]

    everything = [seen, low, high, expected, *(limits or [])]
    bottom = min(float(np.nanmin(part)) for part in everything)
    top = max(float(np.nanmax(part)) for part in everything)
    bars = bottom < _BARS_UNTIL * top
    margin = 0.08 * (top - bottom)
    domain = (0.0, top * 1.04) if bars else (bottom - margin, top + margin)

    data = style.frame(
        left=edges[:-1], right=edges[1:], count=seen, low=low, high=high, mean=expected
    )
    outer = [float(edges[0]), float(edges[-1])]
    x = alt.X(
        "left:Q",
        scale=alt.Scale(domain=outer, nice=False),
        axis=alt.Axis(
            title="lag: earthquake minus epoch (days)",
            grid=False,
            labelExpr=style.NUMBER_LABELS,
        ),
    )
    y = style.count_axis("count", "earthquakes per bin", domain[1], low=domain[0])
    gap = min(1.0, 120.0 / n)
    layers = []
    if bars:
        layers.append(
            alt.Chart(data)
            .mark_rect(color=style.BLUE, opacity=style.BAR_OPACITY, stroke=None, xOffset=gap / 2)
            .encode(x=x, x2="right", y=y, y2=alt.Y2Datum(0))
        )
    layers.append(
        alt.Chart(data)
        .mark_rect(color=style.INK, opacity=style.BAND_OPACITY)
        .encode(
            x=x,
            x2="right",
            y=style.count_axis("low", "earthquakes per bin", domain[1], low=domain[0]),
            y2="high",
        )
    )
    layers.append(_steps(edges, expected, x, y, color=style.INK, strokeWidth=1.5))
    for limit in limits or []:
        layers.append(
            _steps(
                edges, limit, x, y, color=style.VERMILION, strokeWidth=2,
                strokeDash=list(style.DASHED),
            )
        )  # fmt: skip
    if not bars:
        layers.append(_steps(edges, seen, x, y, color=style.BLUE, strokeWidth=2.5))
    layers += _window(window_days, outer)

    keys = [
        style.Key("counted", "bar", style.BLUE, opacity=style.BAR_OPACITY)
        if bars
        else style.Key("counted", "line", style.BLUE, thickness=2.5),
        style.Key("null mean", "line", thickness=1.5),
        style.Key(f"{numbers.percent(level, 0)}, bin by bin", "band", opacity=style.BAND_OPACITY),
    ]
    if limits is not None:
        keys.append(
            style.Key(
                f"{numbers.percent(level, 0)}, all bins", "line", style.VERMILION, style.DASHED
            )
        )
    chart = style.finished(layers, height_px=360, keys=keys, above_px=26)
    return Figure.of(
        chart,
        kind="lags",
        title=title,
        caption=_caption(n_epochs, bars=bars, limits=limits is not None, level=level),
        alt=_alt(title, edges, seen, expected, limits, window_days, n_epochs),
    )


def _steps(
    edges: style.Floats, values: style.Floats, x: object, y: object, **look: object
) -> object:
    """A staircase over the bins, closed at the last edge."""
    data = style.frame(left=edges, count=np.append(values, values[-1]))
    return alt.Chart(data).mark_line(interpolate="step-after", **look).encode(x=x, y=y)


def _window(window_days: tuple[float, float], outer: list[float]) -> list[object]:
    """A bracket above the plot over the claim's window, with its lags in words."""
    first, last = max(window_days[0], outer[0]), min(window_days[1], outer[1])
    if first >= last:
        return []
    ends = f"{numbers.days(window_days[0])} to {numbers.days(window_days[1])} days"
    middle = (first + last) / 2
    place = (middle - outer[0]) / (outer[1] - outer[0])
    align = "left" if place < 0.18 else "right" if place > 0.82 else "center"
    anchor = first if align == "left" else last if align == "right" else middle
    look = {"color": style.PURPLE, "strokeWidth": 4}
    bar = alt.Chart(style.one_row()).mark_rule(**look)
    ends_chart = alt.Chart(style.frame(left=[first, last]))
    return [
        bar.encode(x=alt.XDatum(first), x2=alt.X2Datum(last), y=alt.YValue(-8)),
        ends_chart.mark_rule(color=style.PURPLE, strokeWidth=1.5, strokeDash=list(style.DOTTED))
        .encode(x="left:Q", y=alt.YValue(-8), y2=alt.Y2Value("height")),
        style.text_at(
            alt.XDatum(anchor), alt.YValue(-20), f"window of the claim: {ends}", align=align
        ),
    ]  # fmt: skip


def _caption(n_epochs: int, *, bars: bool, limits: bool, level: float) -> str:
    often = f"{numbers.percent(level, 0)} of the time"
    said = [
        f"Earthquakes counted by lag and added up over {numbers.counted(n_epochs, 'epoch')}.",
        f"Chance alone keeps each single bin inside the grey band {often}, "
        "so with many bins a few stand outside it.",
    ]
    if limits:
        said.append(f"It keeps all bins together between the dashed lines {often}.")
    said.append("The decision rests on the window marked on top, not on the highest bin.")
    if not bars:
        said.append("The vertical axis does not start at 0.")
    return " ".join(said)


def _alt(
    title: str,
    edges: style.Floats,
    seen: style.Floats,
    expected: style.Floats,
    limits: list[style.Floats] | None,
    window_days: tuple[float, float],
    n_epochs: int,
) -> str:
    inside = (edges[:-1] >= window_days[0]) & (edges[1:] <= window_days[1])
    text = (
        f"{title}. Bar chart of earthquakes by lag, {len(seen)} bins from {edges[0]:g} to "
        f"{edges[-1]:g} days, {numbers.counted(n_epochs, 'epoch', plain=True)}, "
        f"{seen.sum():.0f} counted in all. "
        f"Bins wholly inside the window of {window_days[0]:g} to {window_days[1]:g} days hold "
        f"{seen[inside].sum():.0f}; the null's mean there is {expected[inside].sum():.1f}."
    )
    if limits is not None:
        outside = int(np.sum((seen < limits[0]) | (seen > limits[1])))
        text += f" {outside} bins lie outside the simultaneous limits."
    return text
