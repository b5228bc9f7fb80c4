"""Line-ups of three bodies: how exact they are in space, and how many any instant has near it."""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence
from typing import Any

import altair as alt
import numpy as np
from numpy.typing import ArrayLike, NDArray

from epochtest.charts import style
from epochtest.charts.figure import Figure
from epochtest.tables import numbers

MOST_MARKS = 1500
_MOST_BARS = 60
_COLUMNS, _ROWS = 80, 28
_LEAST_MS = 5 * 86400e3
_SUM_TOLERANCE = 1e-6  # shares are sums of many floats; rounding stays far below this
_OTHER = ("triangle-left", True, style.INK)
# Shape, filled, colour: no two bodies share a shape that is filled alike.
_LOOKS = {
    "sun": ("circle", True, style.VERMILION),
    "mercury": ("triangle-up", True, style.BLUE),
    "venus": ("diamond", False, style.GREEN),
    "earth": ("square", True, style.GREEN),
    "moon": ("circle", False, style.INK),
    "mars": ("triangle-down", False, style.VERMILION),
    "jupiter": ("diamond", True, style.PURPLE),
    "saturn": ("square", False, style.BLUE),
    "uranus": ("cross", True, style.INK),
    "neptune": ("triangle-right", True, style.GREEN),
    "pluto": ("triangle-up", False, style.PURPLE),
}


def lineup_chart(
    title: str, times_utc: ArrayLike, out_of_plane_deg: ArrayLike, middle: Sequence[str]
) -> Figure:
    """Line-ups along time against the angle by which they miss a straight line in space.

    ``times_utc`` (n,) UTC; ``out_of_plane_deg`` (n,) signed, degrees, NaN where unknown;
    ``middle`` n names of the body between the two others. More than 1500 are counted in cells.
    Raises ValueError for arrays that do not match.
    """
    times = np.asarray(times_utc, dtype="datetime64[us]")
    angle = np.asarray(out_of_plane_deg, dtype=float)
    body = np.array([str(name).lower() for name in middle], dtype=str)
    if not len(times) == len(angle) == len(body):
        raise ValueError(
            f"{len(times)} times, {len(angle)} angles and {len(body)} middle bodies; "
            "give one of each per line-up"
        )
    keep = np.isfinite(angle) & ~np.isnat(times)
    dropped = int(np.sum(~keep))
    times, angle, body = times[keep], angle[keep], body[keep]
    if len(times) == 0:
        return Figure.saying("No line-ups.", kind="lineups", title=title)
    ms = style.milliseconds(times)
    outer = span_of(ms)
    reach = max(1.08 * float(np.abs(angle).max()), 0.1)
    x = style.time_axis("time", *outer)
    y = alt.Y(
        "value:Q",
        scale=alt.Scale(domain=[-reach, reach], nice=False),
        axis=alt.Axis(title="out of plane (degrees)", labelExpr=style.NUMBER_LABELS),
    )
    zero = alt.Chart(style.one_row()).mark_rule(color=style.INK, strokeWidth=1)
    layers = [zero.encode(y=alt.YDatum(0), x=alt.XValue(0), x2=alt.X2Value("width"))]
    counts = Counter(body.tolist())
    order = [name for name in _LOOKS if name in counts] + sorted(counts.keys() - _LOOKS.keys())
    shares = ", ".join(f"{name.capitalize()} {numbers.count(counts[name])}" for name in order)
    if len(times) <= MOST_MARKS:
        layers += [_marks(ms[body == name], angle[body == name], name, x, y) for name in order]
        keys = [_key(name, counts[name]) for name in order]
        shown = "Each mark is one line-up; its shape tells the body in the middle (in the key, with"
        shown += " the number of its line-ups)"
    else:
        layers.append(cells(ms, angle, outer, (-reach, reach), x, y))
        keys = [style.Key("line-ups, counted in cells", "point", style.BLUE, shape="square")]
        shown = "Each square counts the line-ups of one cell: the larger and darker, the more. "
        shown += f"In the middle: {shares}"
    unknown = f" {numbers.count(dropped)} without an angle or a time are left out."
    caption = (
        f"{numbers.counted(len(times), 'line-up')}. {shown}. All lie on one line when projected on "
        "the ecliptic; only those near 0 are nearly straight in space too. Above 0, the body in "
        f"the middle is north of the line between the two others.{unknown if dropped else ''}"
    )
    words = (
        f"{title}. {numbers.counted(len(times), 'line-up', plain=True)} from "
        f"{_day(times.min())} to {_day(times.max())}, out of plane by {angle.min():.2f} to "
        f"{angle.max():.2f} degrees, median size {np.median(np.abs(angle)):.2f}. In the middle: "
        + ", ".join(f"{name.capitalize()} {counts[name]}" for name in order)
        + "."
    )
    chart = style.finished(layers, height_px=340, keys=keys)
    return Figure.of(chart, kind="lineups", title=title, caption=caption, alt=words)


def crowding_chart(counts: Sequence[tuple[int, float]], *, window_days: float) -> Figure:
    """Share of time with k line-ups within +-``window_days`` of the instant, bar by bar.

    ``counts`` are pairs of k (0, 1, ...) and its share of time (0..1). Wide ranges of k are put
    together. Raises ValueError for a negative k or for shares that are none.
    """
    within = f"within ±{numbers.days(window_days)} {'day' if window_days == 1 else 'days'}"
    title = f"Line-ups {within} of an arbitrary instant"
    if len(counts) == 0:
        return Figure.saying("No line-ups to count.", kind="crowding", title=title)
    k = np.array([number for number, _ in counts], dtype=np.int64)
    share = np.array([part for _, part in counts], dtype=float)
    total = float(share.sum())
    if k.min() < 0 or not (share >= 0).all() or total > 1 + _SUM_TOLERANCE:
        raise ValueError(
            f"k from {k.min()} and shares adding up to {total:g}; give k of 0 or more "
            "and shares of time from 0 to 1 that add up to 1"
        )
    steps = (step * 10**power for power in range(19) for step in (1, 2, 5))
    width = next(w for w in steps if (k.max() - k.min() + 1) / w <= _MOST_BARS)
    start = int(k.min()) // width * width
    heights = np.bincount((k - start) // width, weights=100 * share)
    left = start + width * np.arange(len(heights))
    ends = [float(left[0]) - 0.7, float(left[-1]) + width - 0.3]
    data = style.frame(
        left=left - 0.5 + 0.08 * width, right=left - 0.5 + 0.92 * width, share=heights
    )
    named = f"line-ups {within}" + ("" if width == 1 else f" (bars of {width})")
    x = whole_axis("left", named, *ends)
    y = alt.Y(
        "share:Q",
        scale=alt.Scale(domain=[0.0, max(1.04 * float(heights.max()), 1e-3)], nice=False),
        axis=alt.Axis(title="share of time (%)", tickCount=6),
    )
    bars = alt.Chart(data).mark_rect(color=style.GREEN, opacity=style.BAR_OPACITY)
    layers = [bars.encode(x=x, x2="right", y=y, y2=alt.Y2Datum(0))]
    none = float(share[k == 0].sum())
    mean = float(k @ share) / total if total > 0 else 0.0
    caption = (
        f"How many line-ups lie {within} of an instant picked without looking at the sky: "
        f"{numbers.decimal(mean, 2)} on average, at least one for "
        f"{numbers.percent(total - none)} of the time. To find that many near an earthquake is "
        "what any instant would give."
    )
    words = (
        f"{title}. Bars over k from {k.min()} to {k.max()}; mean {mean:.2f}, at least one "
        f"{100 * (total - none):.1f} % of the time. Most often {int(k[np.argmax(share)])}, for "
        f"{100 * share.max():.1f} % of the time."
    )
    chart = style.finished(layers, height_px=280)
    return Figure.of(chart, kind="crowding", title=title, caption=caption, alt=words)


def whole_axis(field: str, title: str, low: float, high: float) -> Any:
    """An x channel from ``low`` to ``high``, labelled at whole numbers only."""
    axis = alt.Axis(
        title=title,
        grid=False,
        format=",d",
        values=style.whole_ticks(low, high, 14),
        labelExpr=style.NUMBER_LABELS,
    )
    scale = alt.Scale(domain=[low, high], nice=False, zero=False)
    return alt.X(f"{field}:Q", scale=scale, axis=axis)


def span_of(ms: style.Floats) -> tuple[float, float]:
    """First and last of some instants (n,) in milliseconds with a margin, 5 days at least."""
    first, last = float(ms.min()), float(ms.max())
    margin = max(0.015 * (last - first), (_LEAST_MS - (last - first)) / 2)
    return first - margin, last + margin


def cells(
    x_values: style.Floats,
    y_values: style.Floats,
    x_range: tuple[float, float],
    y_range: tuple[float, float],
    x: Any,
    y: Any,
) -> Any:
    """Points (n,) counted in cells; one square per cell, larger and darker for more.

    The channels ``x`` and ``y`` read the fields ``time`` and ``value``.
    """
    grid, x_edges, y_edges = np.histogram2d(
        x_values, y_values, bins=(_COLUMNS, _ROWS), range=(x_range, y_range)
    )
    i, j = np.nonzero(grid)
    depth = np.log10(grid[i, j]) / max(1.0, np.log10(grid.max()))
    data = style.frame(
        time=(x_edges[i] + x_edges[i + 1]) / 2,
        value=(y_edges[j] + y_edges[j + 1]) / 2,
        opacity=0.6 + 0.4 * depth,
        area=10 + 38 * depth,
    )
    mark = alt.Chart(data).mark_point(shape="square", filled=True, color=style.BLUE, strokeWidth=0)
    return mark.encode(
        x=x,
        y=y,
        opacity=alt.Opacity("opacity:Q", scale=None),
        size=alt.Size("area:Q", scale=None),
    )


def dots(
    noun: str,
    at: style.Floats,
    values: style.Floats,
    x_range: tuple[float, float],
    y_range: tuple[float, float],
    x: Any,
    y: Any,
) -> tuple[Any, style.Key, str]:
    """Layer, key and how to read it: points (n,) as dots, counted in cells above 1500.

    The channels are as for `cells`; ``noun`` names what one point is.
    """
    if len(at) > MOST_MARKS:
        key = style.Key(f"{noun}s, counted in cells", "point", style.BLUE, shape="square")
        read = f"Each square counts the {noun}s of one cell: the larger and darker, the more."
        return cells(at, values, x_range, y_range, x, y), key, read
    size = 50 if len(at) <= 200 else 18
    drawn = alt.Chart(style.frame(time=at, value=values)).mark_point(
        shape="circle", filled=True, color=style.BLUE, size=size, opacity=1
    )
    return drawn.encode(x=x, y=y), style.Key(noun, "point", style.BLUE), f"Each dot is one {noun}."


def _marks(ms: style.Floats, angle: style.Floats, name: str, x: Any, y: Any) -> Any:
    shape, filled, colour = _LOOKS.get(name, _OTHER)
    mark = alt.Chart(style.frame(time=ms, value=angle)).mark_point(
        shape=shape, filled=filled, color=colour, size=42, strokeWidth=1.6, opacity=0.9
    )
    return mark.encode(x=x, y=y)


def _key(name: str, count: int) -> style.Key:
    shape, filled, colour = _LOOKS.get(name, _OTHER)
    label = f"{name.capitalize()} {numbers.count(count)}"
    return style.Key(label, "point", colour, shape=shape, filled=filled, size=60)


def _day(instant: NDArray[np.datetime64] | np.datetime64) -> str:
    return str(instant.astype("datetime64[D]"))
