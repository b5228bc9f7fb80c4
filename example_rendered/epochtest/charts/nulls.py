"""What one null gives: hits at every shift, and where the observed number stands."""

from __future__ import annotations

from collections.abc import Mapping

import altair as alt
import numpy as np
from numpy.typing import ArrayLike, NDArray

from epochtest.charts import style
from epochtest.charts.figure import Figure
from epochtest.study.claims import Direction
from epochtest.tables import numbers

_MOST_BARS = 70


def null_histogram(
    hits_counts: Mapping[int, int] | tuple[ArrayLike, ArrayLike],
    *,
    observed: int,
    mean: float,
    p: float,
    direction: Direction,
    name: str,
) -> Figure:
    """Histogram of hits over all members of a null with the observed hits marked.

    ``hits_counts`` maps a number of hits to how many shifts gave it, or is the pair
    (values (k,), counts (k,)). Shifts at least as extreme as the observed one stand out.
    """
    title = f"Hits under the null {name}"
    if isinstance(hits_counts, Mapping):
        values = np.array(list(hits_counts.keys()), dtype=np.int64)
        weights = np.array(list(hits_counts.values()), dtype=np.int64)
    else:
        values, weights = (np.asarray(part, dtype=np.int64) for part in hits_counts)
    total = int(weights.sum())
    if total == 0:
        return Figure.saying("No shifts, so no null to compare with.", kind="null", title=title)
    if observed == 0 and values.max() == 0:
        return Figure.saying(
            "No earthquakes inside the windows at any shift.", kind="null", title=title
        )
    upward = direction == "more" or (direction == "either" and observed >= mean)
    left, width, share, extreme = _bars(values, weights, observed, upward=upward)
    data = style.frame(
        left=left - 0.5, right=left + width - 0.5, share=100 * share, extreme=extreme
    )
    low, high = float(data["left"].min()), float(data["right"].max())
    low, high = min(low, observed - 0.5), max(high, observed + 0.5)
    x = alt.X(
        "left:Q",
        scale=alt.Scale(domain=[low, high], nice=False),
        axis=alt.Axis(
            title="hits (earthquakes inside the windows)",
            grid=False,
            values=style.whole_ticks(low, high),
            format=",d",
            labelExpr=style.NUMBER_LABELS,
        ),
    )
    y = alt.Y(
        "share:Q",
        axis=alt.Axis(title="share of shifts (%)", labelExpr="format(datum.value, ',.4~f')"),
    )
    place = (observed - low) / (high - low)
    align = "left" if place < 0.15 else "right" if place > 0.85 else "center"
    rule = alt.Chart(style.one_row())
    layers = [
        alt.Chart(data[~data["extreme"]]).mark_rect(color=style.BLUE, opacity=style.BAR_OPACITY)
        .encode(x=x, x2="right", y=y, y2=alt.Y2Datum(0)),
        alt.Chart(data[data["extreme"]]).mark_rect(color=style.VERMILION, opacity=1)
        .encode(x=x, x2="right", y=y, y2=alt.Y2Datum(0)),
        rule.mark_rule(color=style.INK, strokeDash=list(style.DASHED), strokeWidth=1.5)
        .encode(x=alt.XDatum(mean), y=alt.YValue(0), y2=alt.Y2Value("height")),
        rule.mark_rule(color=style.INK, strokeWidth=3)
        .encode(x=alt.XDatum(observed), y=alt.YValue(-8), y2=alt.Y2Value("height")),
        style.text_at(
            alt.XDatum(observed), alt.YValue(-18),
            f"observed {numbers.count(observed)}, {numbers.p_phrase(p)}",
            align=align, bold=True,
        ),
    ]  # fmt: skip
    tail = "as many or more" if upward else "as few or fewer"
    keys = [
        style.Key("shifts", "bar", style.BLUE, opacity=style.BAR_OPACITY),
        style.Key(f"shifts with {tail}", "bar", style.VERMILION),
        style.Key(
            f"mean {numbers.decimal(mean, 1 if mean >= 10 else 2)}",
            "line",
            dash=style.DASHED,
            thickness=1.5,
        ),
    ]
    in_tail = int(weights[values >= observed if upward else values <= observed].sum())
    sides = " Both directions count for this claim, so p is larger than this one tail."
    caption = (
        f"Hits at each of {numbers.count(total)} placements of the epochs; the thick rule is the "
        f"placement that happened. The further it stands out, the less chance alone explains it. "
        f"Neighbouring shifts are alike, so the bars hold fewer independent cases than shifts."
        f"{sides if direction == 'either' else ''}"
    )
    words = (
        f"{title}. Histogram of hits over {total} shifts, from {values[weights > 0].min()} to "
        f"{values[weights > 0].max()}, mean {mean:.1f}. Observed {observed} hits; {in_tail} shifts "
        f"have {tail}; {numbers.p_phrase(p)}."
    )
    chart = style.finished(layers, height_px=310, keys=keys, above_px=26)
    return Figure.of(chart, kind="null", title=title, caption=caption, alt=words)


def _bars(
    values: NDArray[np.int64], weights: NDArray[np.int64], observed: int, *, upward: bool
) -> tuple[NDArray[np.int64], int, style.Floats, NDArray[np.bool_]]:
    """First value, width in hits, share of each bar and whether it lies in the tail.

    The tail's end falls on an edge between bars.
    """
    low, high = int(values.min()), int(values.max())
    width = max(1, -(-(high - low + 1) // _MOST_BARS))
    edge = observed if upward else observed + 1
    start = edge - width * (-(-(edge - low) // width))
    index = (values - start) // width
    share = np.bincount(index, weights=weights) / weights.sum()
    left = start + width * np.arange(len(share))
    return left, width, share, left >= observed if upward else left <= observed
