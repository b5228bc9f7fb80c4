"""The summary picture: how strong an effect each claim's data show, and could have shown.

One claim takes one strip::

    title of the claim                         finding, ratio (inflated interval)
        |----------=====O=====----------|   <|     <>
        thin: inflated  thick: exact   detectable  asserted
"""

from __future__ import annotations

import textwrap
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Any, NamedTuple

import altair as alt
import numpy as np

from epochtest.charts import style
from epochtest.charts.figure import Figure
from epochtest.study.results import CAUTION, ClaimResult, FindingWord
from epochtest.tables import numbers

Bounds = tuple[float, float | None]

MOST_CLAIMS = 60
_STRIP_PX, _LINE_PX, _MARKS_PX = 68, 18, 24
_TITLE_CHARACTERS = 46
_TICKS = (0.01, 0.02, 0.05, 0.1, 0.2, 0.5, 1, 2, 5, 10, 20, 50, 100)
_NEAR_TICKS = (0.1, 0.2, 0.3, 0.4, 0.5, 0.6, 0.7, 0.8, 0.9, 1, 1.1, 1.25, 1.5, 2, 3, 4, 6, 10)
_AROUND_ONE = (0.8, 1.25)
_INTERVALS_REACH = 2.0


class EffectRow(NamedTuple):
    """One claim's strip; None where there is no such number (upper end None: unbounded)."""

    title: str
    ratio: float | None
    exact: Bounds
    inflated: Bounds
    detectable: float | None
    asserted: float | None
    finding: FindingWord


def effect_rows(results: Iterable[ClaimResult]) -> list[EffectRow]:
    """The strips of decided claims, in the order given."""
    return [
        EffectRow(
            title=result.test.claim.title,
            ratio=result.test.effect.rate_ratio,
            exact=result.test.effect.exact_interval,
            inflated=result.test.effect.inflated_interval,
            detectable=result.test.effect.detectable_ratio_family,
            asserted=result.test.claim.asserted_rate_ratio,
            finding=result.finding,
        )
        for result in results
    ]


def effect_chart(
    rows: Sequence[EffectRow], *, confidence: float = 0.95, power: float = 0.8
) -> Figure:
    """Rate ratios of all claims on one log axis; one strip per claim.

    Raises ValueError for more than 60 claims, which no single picture can show.
    """
    title = "Rate of earthquakes inside the windows over outside"
    if not rows:
        return Figure.saying("No claims.", kind="effect", title=title)
    if len(rows) > MOST_CLAIMS:
        raise ValueError(f"{len(rows)} claims do not fit one chart; draw {MOST_CLAIMS} at a time")
    low, high = _domain(rows)
    x = alt.X(
        "ratio:Q",
        scale=alt.Scale(type="log", domain=[low, high], nice=False),
        axis=alt.Axis(
            title="rate ratio, log scale (below 1 fewer, above 1 more)",
            values=[t for t in (_NEAR_TICKS if high / low < 40 else _TICKS) if low <= t <= high],
            format="~g",
            gridOpacity=0.12,
        ),
    )
    names = [
        textwrap.wrap(row.title, _TITLE_CHARACTERS, max_lines=2, placeholder=" …") for row in rows
    ]
    heights = np.array([_STRIP_PX + _LINE_PX * (len(name) - 1) for name in names])
    bottom = int(heights.sum())
    axis = _Axis(x=x, low=low, high=high, bottom=float(bottom))
    feet = np.cumsum(heights).astype(float)
    layers = [
        *_words(rows, names, feet - heights, axis),
        *_bars(rows, feet - _MARKS_PX, axis),
        *_marks(rows, feet - _MARKS_PX, axis),
    ]
    keys = [
        style.Key("measured", "point", style.BLUE, size=90),
        style.Key("exact", "line", style.BLUE, thickness=8, opacity=0.6),
        style.Key("with clustering", "line", style.BLUE),
        style.Key(
            "detectable", "point", style.VERMILION, shape="triangle-up", filled=False, size=90
        ),
    ]
    if any(row.asserted is not None for row in rows):
        keys.append(
            style.Key("asserted", "point", style.PURPLE, shape="diamond", filled=False, size=90)
        )
    drawn = style.key_layers(keys, 4)
    chart = alt.layer(*layers, *drawn).properties(
        width=640,
        height=bottom,
        padding={"top": style.EDGE_PX, "left": 16, "right": 20, "bottom": style.EDGE_PX},
    )
    caption = (
        f"One strip per claim; the vertical rule at 1 means no difference. The thick bar is the "
        f"{numbers.percent(confidence, 0)} interval if earthquakes were independent, "
        f"the thin bar the wider one that allows for their clustering; arrows run on beyond "
        f"the chart. The open triangle is the smallest ratio that this test would have "
        f"found with {numbers.percent(power, 0)} power: what lies between 1 and the triangle "
        f"could have been missed. {CAUTION}"
    )
    words = f"{title}, {numbers.counted(len(rows), 'claim', plain=True)}. " + " ".join(
        _in_words(row) for row in rows
    )
    return Figure.of(style.themed(chart), kind="effect", title=title, caption=caption, alt=words)


def _in_words(row: EffectRow) -> str:
    text = (
        f"{row.title}: {row.finding}, ratio {numbers.ratio(row.ratio)}, exact interval "
        f"{numbers.interval(row.exact)}, with clustering {numbers.interval(row.inflated)}, "
        f"detectable {numbers.ratio(row.detectable)}"
    )
    return text + (f", asserted {numbers.ratio(row.asserted)}." if row.asserted else ".")


def _domain(rows: Sequence[EffectRow]) -> tuple[float, float]:
    """Ends of the axis: all points; interval ends only as far as twice beyond the points."""
    points = [
        value
        for row in rows
        for value in (row.ratio, row.detectable, row.asserted)
        if value is not None and 0.0 < value < np.inf
    ]
    least, most = min([*points, _AROUND_ONE[0]]), max([*points, _AROUND_ONE[1]])
    ends = [
        end
        for row in rows
        for bounds in (row.exact, row.inflated)
        for end in bounds
        if end is not None and np.isfinite(end)
    ]
    low = min([least, *(max(end, least / _INTERVALS_REACH) for end in ends)])
    high = max([most, *(min(end, most * _INTERVALS_REACH) for end in ends)])
    margin = (high / low) ** 0.05
    return low / margin, high * margin


@dataclass(frozen=True)
class _Axis:
    """The ratio axis and a y channel in pixels downwards, shared by all layers."""

    x: Any
    low: float
    high: float
    bottom: float

    @property
    def y(self) -> Any:
        scale = alt.Scale(domain=[0, self.bottom], range=[0, self.bottom], nice=False)
        return alt.Y("y:Q", scale=scale, axis=None)


def _words(
    rows: Sequence[EffectRow], names: list[list[str]], tops: style.Floats, axis: _Axis
) -> list[Any]:
    """Titles left, findings right, a line between strips and the rule at 1 in each strip."""
    lines = [
        (top + 15 + _LINE_PX * number, line)
        for top, name in zip(tops, names, strict=True)
        for number, line in enumerate(name)
    ]
    found = [
        f"{row.finding}: {numbers.ratio(row.ratio)} ({numbers.interval(row.inflated)})"
        for row in rows
    ]
    feet = np.append(tops[1:], axis.bottom)
    layers = []
    for side, texts, heights, weight in (
        ("left", [line for _, line in lines], [y for y, _ in lines], "bold"),
        ("right", found, tops + 15, "normal"),
    ):
        edge = axis.low if side == "left" else axis.high
        data = style.frame(ratio=np.full(len(texts), edge), y=heights, text=texts)
        mark = alt.Chart(data).mark_text(
            align=side, baseline="middle", fontSize=style.LABEL_PX, fontWeight=weight,
            color=style.INK,
        )  # fmt: skip
        layers.append(mark.encode(x=axis.x, y=axis.y, text="text:N"))
    ones = style.frame(ratio=np.ones(len(rows)), y=feet - _MARKS_PX - 20, foot=feet)
    rule = alt.Chart(ones).mark_rule(color=style.INK, strokeWidth=1.5)
    layers.append(rule.encode(x=axis.x, y=axis.y, y2="foot"))
    if len(rows) > 1:
        ends = style.frame(
            ratio=np.full(len(rows) - 1, axis.low),
            other=np.full(len(rows) - 1, axis.high),
            y=tops[1:],
        )
        parting = alt.Chart(ends).mark_rule(color=style.INK, opacity=0.2)
        layers.append(parting.encode(x=axis.x, x2="other", y=axis.y))
    return layers


def _bars(rows: Sequence[EffectRow], middles: style.Floats, axis: _Axis) -> list[Any]:
    """The two intervals of every claim; arrows where they run on beyond the axis."""
    layers = []
    for intervals, thick, opacity in (
        ([row.exact for row in rows], 10, 0.6),
        ([row.inflated for row in rows], 2, 1.0),
    ):
        low = np.array([bounds[0] for bounds in intervals], dtype=float)
        high = np.array([np.inf if b[1] is None else b[1] for b in intervals], dtype=float)
        first, last = np.maximum(low, axis.low), np.minimum(high, axis.high)
        shown = first < last
        data = style.frame(ratio=first[shown], other=last[shown], y=middles[shown])
        bar = alt.Chart(data).mark_rule(color=style.BLUE, strokeWidth=thick, opacity=opacity)
        layers.append(bar.encode(x=axis.x, x2="other", y=axis.y))
    for ends, cut, arrow in (
        (first, low < axis.low, "triangle-left"), (last, high > axis.high, "triangle-right"),
    ):  # fmt: skip
        for which, shape, angle in ((cut, arrow, 0), (~cut, "stroke", 90)):
            here = shown & which
            if here.any():
                mark = alt.Chart(style.frame(ratio=ends[here], y=middles[here])).mark_point(
                    shape=shape, angle=angle, filled=True, color=style.BLUE, stroke=style.BLUE,
                    strokeWidth=2, size=70, opacity=1,
                )  # fmt: skip
                layers.append(mark.encode(x=axis.x, y=axis.y))
    return layers


def _marks(rows: Sequence[EffectRow], middles: style.Floats, axis: _Axis) -> list[Any]:
    """Points of all claims: asserted just above the bars, measured on, detectable just below."""
    layers = []
    for values, shift, look in (
        ([row.asserted for row in rows], -12, {"shape": "diamond", "color": style.PURPLE}),
        ([row.detectable for row in rows], 13, {"shape": "triangle-up", "color": style.VERMILION}),
        ([row.ratio for row in rows], 0, {"shape": "circle", "color": style.BLUE, "filled": True}),
    ):
        at = np.array([np.nan if value is None else value for value in values], dtype=float)
        shown = (at >= axis.low) & (at <= axis.high)
        if shown.any():
            data = style.frame(ratio=at[shown], y=middles[shown] + shift)
            mark = alt.Chart(data).mark_point(
                **{"filled": False, "size": 80, "strokeWidth": 2.2, "opacity": 1, **look}
            )
            layers.append(mark.encode(x=axis.x, y=axis.y))
    return layers
