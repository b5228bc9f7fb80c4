"""The look of every chart: one theme for light and dark pages, on paper and on a phone.

The background is transparent and all lettering takes the colour of the page's text
(``currentColor``). The four series colours keep apart under every colour-vision deficiency
and stand out from white and from near-black by 3:1 or more (WCAG 2.2, criterion 1.4.11);
each use of a colour has a second cue: a dash, a shape or a label.

The key of a chart is drawn by hand above the plot, so that a bar, a band and a dashed line
each show as what they are::

    |<- x = 0 of the plot
    [#] hits by lag   [ ] band of chance   - - limit       y = -key_top
    +----------------------------------------------+       y = 0
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, Literal

import altair as alt
import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray

BLUE = "#0072B2"
VERMILION = "#D55E00"
GREEN = "#009E73"
PURPLE = "#CC79A7"
PALETTE = (BLUE, VERMILION, GREEN, PURPLE)
INK = "currentColor"
FONT = "sans-serif"
WIDTH_PX = 680
LABEL_PX = 13
BAND_OPACITY = 0.18
BAR_OPACITY = 0.9
DASHED = (6, 4)
DOTTED = (2, 3)
KEY_ROW_PX = 21
EDGE_PX = 6
_KEY_WIDTH_PX = 600
_CHARACTER_PX = 6.9  # wide enough for the widest common sans-serif at 13 pixels
NUMBER_LABELS = "replace(replace(datum.label, regexp(',', 'g'), '\u2009'), regexp('^-'), '\u2212')"

Floats = NDArray[np.float64]
KeyMark = Literal["bar", "band", "line", "point"]


@dataclass(frozen=True)
class Key:
    """One entry of a chart's key."""

    label: str
    mark: KeyMark
    colour: str = INK
    dash: tuple[int, ...] = ()
    shape: str = "circle"
    filled: bool = True
    opacity: float = 1.0
    thickness: float = 2.0
    size: float = 60.0


def frame(**columns: ArrayLike) -> pd.DataFrame:
    """Equal-length columns as a frame for Altair."""
    return pd.DataFrame({name: np.asarray(values) for name, values in columns.items()})


def one_row() -> pd.DataFrame:
    """A frame for marks that stand at fixed pixels."""
    return frame(only=[0])


def text_at(
    x: Any, y: Any, text: str, *, align: str = "left", size: int = LABEL_PX, bold: bool = False
) -> Any:
    """One line of text at pixels or datums ``x``, ``y``."""
    mark = alt.Chart(one_row()).mark_text(
        align=align,
        baseline="middle",
        fontSize=size,
        color=INK,
        fontWeight="bold" if bold else "normal",
        text=text,
    )
    return mark.encode(x=x, y=y)


def key_rows(keys: Sequence[Key]) -> list[list[tuple[float, Key]]]:
    """Places of key entries (pixels from the left), wrapped to the chart's width."""
    rows: list[list[tuple[float, Key]]] = [[]]
    x = 0.0
    for key in keys:
        width = 38.0 + _CHARACTER_PX * len(key.label)
        if rows[-1] and x + width > _KEY_WIDTH_PX:
            rows.append([])
            x = 0.0
        rows[-1].append((x, key))
        x += width + 8.0
    return rows


def _key_mark(key: Key, x: float, y: float) -> Any:
    chart = alt.Chart(one_row())
    left, right = alt.XValue(x), alt.X2Value(x + 22)
    if key.mark == "bar":
        mark = chart.mark_rect(color=key.colour, opacity=key.opacity)
        return mark.encode(
            x=alt.XValue(x + 4), x2=alt.X2Value(x + 18), y=alt.YValue(y - 7), y2=alt.Y2Value(y + 6)
        )
    if key.mark == "band":
        mark = chart.mark_rect(color=key.colour, opacity=key.opacity)
        return mark.encode(x=left, x2=right, y=alt.YValue(y - 6), y2=alt.Y2Value(y + 6))
    if key.mark == "point":
        mark = chart.mark_point(
            shape=key.shape,
            filled=key.filled,
            color=key.colour,
            size=key.size,
            strokeWidth=1.8,
            opacity=key.opacity,
        )
        return mark.encode(x=alt.XValue(x + 12), y=alt.YValue(y))
    mark = chart.mark_rule(
        color=key.colour,
        strokeWidth=key.thickness,
        strokeDash=list(key.dash) or [1, 0],
        opacity=key.opacity,
    )
    return mark.encode(x=left, x2=right, y=alt.YValue(y))


def key_layers(keys: Sequence[Key], above_px: float = 0.0) -> list[Any]:
    """Layers of the key, drawn ``above_px`` above the plot (the layout makes room for them)."""
    rows = key_rows(keys) if keys else []
    layers = []
    for number, row in enumerate(reversed(rows)):
        y = -above_px - 14.0 - KEY_ROW_PX * number
        for x, key in row:
            layers.append(_key_mark(key, x, y))
            layers.append(text_at(alt.XValue(x + 28), alt.YValue(y), key.label))
    return layers


def finished(
    layers: Sequence[Any], *, height_px: float, keys: Sequence[Key] = (), above_px: float = 0.0
) -> Any:
    """Layers as one chart of the full width with its key, ``height_px`` high as a whole.

    ``above_px`` is room between plot and key for labels that stand above the plot.
    """
    chart = alt.layer(*layers, *key_layers(keys, above_px)).properties(
        width=WIDTH_PX,
        height=height_px,
        autosize=alt.AutoSizeParams(type="fit", contains="padding"),
        padding={"top": EDGE_PX, "left": EDGE_PX, "right": EDGE_PX + 12, "bottom": EDGE_PX},
    )
    return themed(chart)


def themed(chart: Any) -> Any:
    """``chart`` with the theme; call it once, on the outermost chart."""
    return (
        chart.configure(background="transparent", aria=False, font=FONT)
        .configure_view(stroke=None)
        .configure_axis(
            labelColor=INK,
            titleColor=INK,
            tickColor=INK,
            domainColor=INK,
            gridColor=INK,
            gridOpacity=0.1,
            labelFontSize=LABEL_PX,
            titleFontSize=LABEL_PX,
            titleFontWeight="normal",
            titlePadding=9,
            labelOverlap="greedy",
            labelSeparation=6,
        )
    )


def milliseconds(utc: ArrayLike) -> Floats:
    """UTC instants as milliseconds since 1970, the number a Vega time axis takes."""
    instants = np.asarray(utc, dtype="datetime64[us]")
    return instants.astype("datetime64[ms]").astype(np.int64).astype(float)


def time_axis(field: str, first_ms: float, last_ms: float, *, labels: bool = True) -> Any:
    """An x channel on UTC, labelled in years, months or days as the span asks."""
    days = (last_ms - first_ms) / 86400e3
    form = "%Y" if days > 8 * 365 else "%b %Y" if days > 150 else "%d %b %Y"
    axis = alt.Axis(format=form, tickCount=8, grid=False, title=None, labels=labels)
    scale = alt.Scale(type="utc", domain=[first_ms, last_ms], nice=False)
    return alt.X(f"{field}:T", scale=scale, axis=axis)


def whole_ticks(low: float, high: float, most: int = 10) -> list[int]:
    """Whole numbers in [low, high] at steps of 1, 2 or 5 times a power of ten, ``most`` or so."""
    reach = max(high - low, 1.0) / most
    power = 10 ** max(0, int(np.floor(np.log10(reach))))
    step = next((k * power for k in (1, 2, 5) if k * power >= reach), 10 * power)
    first = int(np.ceil(low / step)) * step
    return list(range(first, int(np.floor(high)) + 1, step))


def count_axis(
    field: str,
    title: str | list[str],
    high: float,
    *,
    low: float = 0.0,
    most_ticks: int = 6,
    **look: Any,
) -> Any:
    """A y channel from ``low`` to ``high``, labelled at whole numbers only."""
    axis = alt.Axis(
        title=title,
        format=",d",
        values=whole_ticks(low, high, most_ticks),
        labelExpr=NUMBER_LABELS,
        **look,
    )
    scale = alt.Scale(domain=[float(low), float(max(high, 1.0))], nice=False, zero=False)
    return alt.Y(f"{field}:Q", scale=scale, axis=axis)
