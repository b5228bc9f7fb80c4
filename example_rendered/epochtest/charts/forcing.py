"""How strong it is: tides of the bodies beside everyday loads, and the tide through days."""

from __future__ import annotations

import json
import textwrap
from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Any

import altair as alt
import numpy as np
from numpy.typing import ArrayLike, NDArray

from epochtest.charts import style
from epochtest.charts.figure import Figure
from epochtest.tables import numbers

MOST_ROWS = 40
MOST_LINES = 4
_STRIP_PX = 34.0
_NAME_CHARACTERS, _NAME_PX = 28, 200
_MOST_TICKS = 9
_LEAST_DAYS = 0.25
_ROOM_FOR_NUMBERS = 0.22  # of the axis, at its right
_MOST_POINTS, _STRETCHES = 2400, 600
_JOINED_UNTIL_DAYS = 0.1  # a fifth of a half-daily tide per part
# Shape, filled, colour, name in the key.
_LOOKS = {
    "body": ("circle", True, style.BLUE, "tide of a body"),
    "load": ("diamond", False, style.VERMILION, "everyday load"),
}
_DASHES: tuple[tuple[int, ...], ...] = ((), style.DASHED, style.DOTTED, (12, 3, 2, 3))
_NO_OCEAN = "The load of the ocean tides is left out; near coasts it can be the larger part."


def forcing_chart(
    rows: Sequence[tuple[str, float, str]],
    unit: str,
    *,
    note: str,
    moon_mean: float | None = None,
    title: str = "Tides of the bodies beside everyday loads",
) -> Figure:
    """Strengths on one log axis, the strongest on top, each with its number at the right.

    ``rows`` are (name, value in ``unit``, kind "body" or "load"); ``moon_mean``, in ``unit``,
    is the tide of the Moon at its mean distance, drawn as a vertical rule. ``note`` ends the
    caption: what is left out (ocean loading). Values that are not above 0 have no place on a
    log axis and are named in the caption; of more than 40 rows the strongest are drawn.

    Raises ValueError for another kind.
    """
    for name, _, kind in rows:
        if kind not in _LOOKS:
            raise ValueError(f"{name!r} is of kind {kind!r}; give 'body' or 'load'")
    some = sorted((row for row in rows if 0.0 < row[1] < np.inf), key=lambda row: -row[1])
    missing = [name for name, value, _ in rows if not 0.0 < value < np.inf]
    if not some:
        nothing = Figure.saying("No strengths above 0.", kind="forcing", title=title)
        return replace(nothing, caption=f"{nothing.caption} {note}", alt=f"{nothing.alt} {note}")
    weaker = len(some) - MOST_ROWS
    some = some[:MOST_ROWS]
    values = np.array([value for _, value, _ in some])
    marked = values if moon_mean is None else np.append(values, moon_mean)
    low = 10.0 ** np.floor(np.log10(marked.min()) - 0.1)
    high = 10.0 ** np.ceil(np.log10(marked.max()) + 0.1)
    far = high * (high / low) ** (_ROOM_FOR_NUMBERS / (1.0 - _ROOM_FOR_NUMBERS))
    powers = _exponents(low, high)
    x = alt.X(
        "value:Q",
        scale=alt.Scale(type="log", domain=[low, far], nice=False),
        axis=alt.Axis(
            title=f"{unit} (log scale)",
            values=[10.0**k for k in powers],
            labelExpr=f"{json.dumps({k: _power(k) for k in powers})}"
            "[round(log(datum.value) / LN10)]",
        ),
    )
    names = [textwrap.wrap(row[0], _NAME_CHARACTERS, max_lines=2, placeholder=" …") for row in some]
    layers = _lollipops(some, names, values, x)
    kinds = [kind for kind in _LOOKS if any(row[2] == kind for row in some)]
    keys = [_key(kind) for kind in kinds]
    if moon_mean is not None:
        rule = alt.Chart(style.frame(value=[moon_mean])).mark_rule(
            color=style.INK, strokeWidth=2, strokeDash=list(style.DASHED)
        )
        layers.insert(0, rule.encode(x=x, y=alt.YValue(0), y2=alt.Y2Value("height")))
        label = f"Moon at its mean distance {_number(moon_mean)}"
        keys.append(style.Key(label, "line", dash=style.DASHED))
    said = [
        "Each step of a power of ten to the right is ten times as strong, so lengths cannot be "
        "compared as on a ruler; the numbers stand at the right. A tide below an everyday load is "
        "weaker than what the ground bears anyway."
        if "load" in kinds
        else "Each step of a power of ten to the right is ten times as strong, so lengths cannot "
        "be compared as on a ruler; the numbers stand at the right."
    ]
    if missing:
        said.append(f"Without a value above 0, so not drawn: {_listed(missing)}.")
    if weaker > 0:
        said.append(f"{numbers.counted(weaker, 'weaker row')} not drawn.")
    said.append(note)
    words = f"{title}, in {unit}. " + "; ".join(
        f"{name} ({kind}) {value:.3g}" for name, value, kind in some
    )
    words += "." if moon_mean is None else f". The Moon at its mean distance: {moon_mean:.3g}."
    chart = style.finished(layers, height_px=95.0 + _STRIP_PX * len(some), keys=keys)
    return Figure.of(chart, kind="forcing", title=title, caption=" ".join(said), alt=words)


def tide_series(
    title: str,
    times_utc: ArrayLike,
    series: Mapping[str, ArrayLike],
    unit: str,
    *,
    note: str = _NO_OCEAN,
) -> Figure:
    """Lines of the tide over days, each with a dash of its own.

    ``times_utc`` (n,) UTC in rising order; ``series`` maps up to 4 names to values (n,) in
    ``unit``, NaN where unknown. Of more than 2400 instants the lowest and the highest value of
    each of 600 parts are joined; over more than 60 days, where the tide's cycles would run
    together, a band between them takes the place of a line. ``note`` ends the caption: what is
    left out.

    Raises ValueError for more than 4 lines, values that do not match, or times out of order.
    """
    times = np.asarray(times_utc, dtype="datetime64[us]")
    lines = {name: np.asarray(values, dtype=float) for name, values in series.items()}
    if len(lines) > MOST_LINES:
        raise ValueError(f"{len(lines)} lines do not fit one chart; draw {MOST_LINES} at a time")
    for name, values in lines.items():
        if len(values) != len(times):
            raise ValueError(f"{name!r} has {len(values)} values for {len(times)} times")
    if (np.diff(times) <= np.timedelta64(0, "us")).any():
        raise ValueError("the times of a series have to rise; sort them and drop repeats")
    lines = {name: values for name, values in lines.items() if np.isfinite(values).any()}
    if not lines:
        nothing = Figure.saying("No values to draw.", kind="tide", title=title)
        return replace(nothing, caption=f"{nothing.caption} {note}", alt=f"{nothing.alt} {note}")
    ms = style.milliseconds(times)
    least = min(float(np.nanmin(values)) for values in lines.values())
    most = max(float(np.nanmax(values)) for values in lines.values())
    margin = max(0.06 * (most - least), 1e-3 * max(abs(least), abs(most)), 1e-30)
    y = alt.Y(
        "value:Q",
        scale=alt.Scale(domain=[least - margin, most + margin], nice=False, zero=False),
        axis=alt.Axis(title=unit, labelExpr=style.NUMBER_LABELS),
    )
    x = _days_axis(float(ms[0]), float(ms[-1]))
    days = float((times[-1] - times[0]) / np.timedelta64(1, "D"))
    band = len(ms) > _MOST_POINTS and days / _STRETCHES > _JOINED_UNTIL_DAYS
    layers, keys = [], []
    if least < 0.0 < most:
        zero = alt.Chart(style.one_row()).mark_rule(color=style.INK, strokeWidth=1, opacity=0.5)
        layers.append(zero.encode(y=alt.YDatum(0), x=alt.XValue(0), x2=alt.X2Value("width")))
    for (name, values), colour, dash in zip(lines.items(), style.PALETTE, _DASHES, strict=False):
        look = {"color": colour, "strokeDash": list(dash) or [1, 0], "strokeJoin": "round"}
        data = style.frame(time=ms, value=values)
        if len(ms) > _MOST_POINTS:
            at, low, high = _stretches(ms, values)
            if band:
                area = alt.Chart(style.frame(time=at, value=low, other=high)).mark_area(
                    color=colour, opacity=style.BAND_OPACITY
                )
                layers.append(area.encode(x=x, y=y, y2="other"))
                edge = alt.Chart(style.frame(time=at, value=high)).mark_line(strokeWidth=2, **look)
                layers.append(edge.encode(x=x, y=y))
                data = style.frame(time=at, value=low)
            else:
                data = style.frame(time=np.repeat(at, 2), value=np.ravel([low, high], "F"))
        line = alt.Chart(data).mark_line(strokeWidth=2, **look)
        layers.append(line.encode(x=x, y=y))
        if len(times) == 1:
            dot = alt.Chart(data).mark_point(color=colour, filled=True, size=60, opacity=1)
            layers.append(dot.encode(x=x, y=y))
        keys.append(style.Key(name, "line", colour, dash))
    said = [f"{numbers.counted(len(lines), 'line')} over {numbers.days(round(days, 2))} days, UTC."]
    if band:
        said.append(f"Each band runs from the lowest to the highest of each of {_STRETCHES} parts.")
    elif len(ms) > _MOST_POINTS:
        said.append(f"Each line joins the lowest and the highest of each of {_STRETCHES} parts.")
    said.append(note)
    words = (
        f"{title}, in {unit}, from {_minute(times[0])} to {_minute(times[-1])} UTC, "
        f"{numbers.counted(len(times), 'instant', plain=True)}. "
        + "; ".join(
            f"{name} {np.nanmin(values):.3g} to {np.nanmax(values):.3g}"
            for name, values in lines.items()
        )
        + "."
    )
    chart = style.finished(layers, height_px=310, keys=keys)
    return Figure.of(chart, kind="tide", title=title, caption=" ".join(said), alt=words)


def _lollipops(
    rows: Sequence[tuple[str, float, str]],
    names: list[list[str]],
    values: style.Floats,
    x: Any,
) -> list[Any]:
    """A stem and a head per row on an axis of names; the numbers at the right edge."""
    place = np.arange(len(rows))
    text = json.dumps({int(k): name for k, name in zip(place, names, strict=True)})
    tall = json.dumps([k for k, name in enumerate(names) if len(name) > 1])
    middle = {"condition": {"test": f"indexof({tall}, datum.value) >= 0", "value": -8}, "value": 0}
    y = alt.Y(
        "row:Q",
        scale=alt.Scale(domain=[-0.6, len(rows) - 0.4], reverse=True, nice=False, zero=False),
        axis=alt.Axis(
            title=None, values=place.tolist(), labelExpr=f"{text}[datum.value]", grid=False,
            ticks=False, domain=False, labelLimit=_NAME_PX, labelOverlap=False, labelPadding=8,
            labelOffset=middle,
        ),
    )  # fmt: skip
    kinds = np.array([row[2] for row in rows])
    data = style.frame(row=place, value=values, text=[_number(value) for value in values])
    written = alt.Chart(data).mark_text(
        align="right", baseline="middle", fontSize=style.LABEL_PX, color=style.INK
    )
    layers = [written.encode(x=alt.XValue("width"), y=y, text="text:N")]
    for kind, (shape, filled, colour, _) in _LOOKS.items():
        part = data[kinds == kind]
        if len(part):
            stem = alt.Chart(part).mark_rule(color=colour, strokeWidth=2, opacity=0.5)
            head = alt.Chart(part).mark_point(
                shape=shape, filled=filled, color=colour, size=90, strokeWidth=2.2, opacity=1
            )
            layers += [stem.encode(x=x, x2=alt.X2Value(0), y=y), head.encode(x=x, y=y)]
    return layers


def _key(kind: str) -> style.Key:
    shape, filled, colour, label = _LOOKS[kind]
    return style.Key(label, "point", colour, shape=shape, filled=filled, size=90)


def _exponents(low: float, high: float) -> list[int]:
    """Powers of ten to label from ``low`` to ``high``: all, or every second, third ..."""
    first, last = round(np.log10(low)), round(np.log10(high))
    return list(range(first, last + 1, 1 + (last - first) // _MOST_TICKS))


def _power(exponent: int) -> str:
    """A power of ten as text: 0.01, 100, 1e−6."""
    if -3 <= exponent <= 4:
        return numbers.decimal(10.0**exponent, max(0, -exponent))
    return f"1e{numbers.signed(str(exponent))}"


def _number(value: float) -> str:
    """Three significant digits: 0.0123, 1 990, 1.10e−6."""
    mantissa, exponent = f"{value:.2e}".split("e")
    power = int(exponent)
    if -3 <= power <= 5:
        return numbers.decimal(float(f"{value:.2e}"), max(0, 2 - power))
    return f"{mantissa}e{numbers.signed(str(power))}"


def _days_axis(first_ms: float, last_ms: float) -> Any:
    """An x channel on UTC with days (with hours below three days) at its ticks."""
    days = (last_ms - first_ms) / 86400e3
    if days > 40:
        return style.time_axis("time", first_ms, last_ms)
    short = max(0.0, _LEAST_DAYS - days) * 86400e3 / 2
    first_ms, last_ms, days = first_ms - short, last_ms + short, max(days, _LEAST_DAYS)
    hours = (2 if days <= 0.5 else 6 if days <= 1 else 12) if days <= 3 else 24 * int(1 + days // 7)
    step = hours * 3600e3
    ticks = np.arange(np.ceil(first_ms / step) * step, last_ms + 1.0, step)
    form = "%d %b %H:%M" if hours < 24 else "%d %b %Y"
    axis = alt.Axis(format=form, values=ticks.tolist(), grid=False, title=None, labelFlush=False)
    scale = alt.Scale(type="utc", domain=[first_ms, last_ms], nice=False)
    return alt.X("time:T", scale=scale, axis=axis)


def _stretches(
    ms: style.Floats, values: style.Floats
) -> tuple[style.Floats, style.Floats, style.Floats]:
    """First instant, lowest and highest value of equal runs of instants; NaN where all are NaN."""
    starts = np.linspace(0, len(ms), _STRETCHES, endpoint=False).astype(np.int64)
    return ms[starts], np.fmin.reduceat(values, starts), np.fmax.reduceat(values, starts)


def _minute(instant: NDArray[np.datetime64] | np.datetime64) -> str:
    return str(instant.astype("datetime64[m]")).replace("T", " ")


def _listed(names: Sequence[str]) -> str:
    more = len(names) - 10
    return ", ".join(names[:10]) + (f" and {more} more" if more > 0 else "")
