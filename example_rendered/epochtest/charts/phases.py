"""Tidal phases of earthquakes as a histogram: a description, not a test."""

from __future__ import annotations

from dataclasses import replace

import altair as alt
import numpy as np
from numpy.typing import ArrayLike
from scipy import stats

from epochtest.charts import style
from epochtest.charts.figure import Figure
from epochtest.tables import numbers

LEVEL = 0.95
_MOST_BINS = 360
_BARS_UNTIL = 0.6
_ROUNDING_DEG = 1e-6
_NOTHING = "No earthquakes with a tidal phase."


def phase_histogram(phase_deg: ArrayLike, n_bins: int = 24, *, title: str, note: str) -> Figure:
    """Earthquakes per bin of tidal phase, with what an even spread would give.

    ``phase_deg`` (n,) from -180 to 180 degrees, NaN where unknown; 0 is the moment at which the
    stress favours slip most, 180 and -180 are the same moment's opposite (Tanaka, Ohtake & Sato
    2002). The band is the Poisson distribution's central 95 % for each bin by itself. ``note``
    ends the caption: what the stresses leave out. Bars start at 0; where the band lies so high
    that bars would hide the differences, a step line on an axis that starts above 0 takes their
    place, and the caption says so.

    Raises ValueError for phases beyond 180 degrees and for fewer than 1 or more than 360 bins.
    """
    if not 1 <= n_bins <= _MOST_BINS:
        raise ValueError(f"{n_bins} bins of phase; choose 1 to {_MOST_BINS}")
    phase = np.asarray(phase_deg, dtype=float)
    known = ~np.isnan(phase)
    missing = int(np.sum(~known))
    phase = phase[known]
    beyond = np.abs(phase) > 180.0 + _ROUNDING_DEG
    if beyond.any():
        raise ValueError(
            f"a phase of {phase[beyond][0]:g} degrees; phases lie between -180 and 180 degrees"
        )
    without = f"{numbers.counted(missing, 'earthquake')} without a phase {_are(missing)} left out."
    if len(phase) == 0:
        nothing = Figure.saying(_NOTHING, kind="phases", title=title)
        said = [_NOTHING, without, note] if missing else [_NOTHING, note]
        return replace(nothing, caption=" ".join(said), alt=f"{title}. {' '.join(said)}")

    edges = np.linspace(-180.0, 180.0, n_bins + 1)
    place = np.floor((phase + 180.0) / 360.0 * n_bins).astype(np.int64) % n_bins
    counts = np.bincount(place, minlength=n_bins)
    even = len(phase) / n_bins
    low, high = (float(end) for end in stats.poisson.interval(LEVEL, even))
    outside = int(np.sum((counts < low) | (counts > high)))

    bottom, top = min(float(counts.min()), low), max(float(counts.max()), high)
    bars = bottom < _BARS_UNTIL * top
    margin = 0.08 * (top - bottom)
    domain = (0.0, 1.04 * top) if bars else (bottom - margin, top + margin)
    x = alt.X(
        "left:Q",
        scale=alt.Scale(domain=[-180, 180], nice=False),
        axis=alt.Axis(
            title="tidal phase (degrees)",
            values=list(range(-180, 181, 45)),
            grid=False,
            labelExpr=style.NUMBER_LABELS,
        ),
    )
    y = style.count_axis("count", "earthquakes per bin", domain[1], low=domain[0])
    if bars:
        gap = 0.04 * 360.0 / n_bins
        data = style.frame(left=edges[:-1] + gap, right=edges[1:] - gap, count=counts)
        mark = alt.Chart(data).mark_rect(color=style.BLUE, opacity=style.BAR_OPACITY)
        seen = mark.encode(x=x, x2="right", y=y, y2=alt.Y2Datum(0))
        key = style.Key("counted", "bar", style.BLUE, opacity=style.BAR_OPACITY)
    else:
        data = style.frame(left=edges, count=np.append(counts, counts[-1]))
        line = alt.Chart(data).mark_line(
            interpolate="step-after", color=style.BLUE, strokeWidth=2.5
        )
        seen = line.encode(x=x, y=y)
        key = style.Key("counted", "line", style.BLUE, thickness=2.5)
    across = {"x": alt.XValue(0), "x2": alt.X2Value("width")}
    one = alt.Chart(style.one_row())
    band = one.mark_rect(color=style.INK, opacity=style.BAND_OPACITY)
    rule = one.mark_rule(color=style.INK, strokeWidth=1.5, strokeDash=list(style.DASHED))
    layers = [
        seen,
        band.encode(y=alt.YDatum(low), y2=alt.Y2Datum(high), **across),
        rule.encode(y=alt.YDatum(even), **across),
        style.text_at(alt.XValue(0), alt.YValue(-12), "hinders slip"),
        style.text_at(alt.XDatum(0), alt.YValue(-12), "favours slip most", align="center"),
        style.text_at(alt.XValue("width"), alt.YValue(-12), "hinders slip", align="right"),
    ]
    share = numbers.percent(LEVEL, 0)
    keys = [
        key,
        style.Key("evenly spread", "line", dash=style.DASHED, thickness=1.5),
        style.Key(f"{share}, bin by bin", "band", opacity=style.BAND_OPACITY),
    ]
    said = [
        f"{numbers.counted(len(phase), 'earthquake')} by tidal phase.",
        "This is a description and no test.",
        f"The dashed line is an even spread, the grey band where {share} of Poisson counts would "
        "lie, for each bin by itself: of many bins a few stand outside it by chance. Clusters of "
        "earthquakes scatter more than Poisson counts, and a tide with unequal half cycles "
        "spreads even random times unevenly.",
    ]
    if missing:
        said.append(without)
    if not bars:
        said.append("The vertical axis does not start at 0.")
    said.append(note)
    words = (
        f"{title}. Histogram of {numbers.counted(len(phase), 'earthquake', plain=True)} in "
        f"{numbers.counted(n_bins, 'bin', plain=True)} of tidal phase, {counts.min()} to "
        f"{counts.max()} per bin; an even spread gives {even:.1f}, its pointwise "
        f"{100 * LEVEL:.0f} % Poisson band is {low:.0f} to {high:.0f}; "
        f"{outside} of {n_bins} bins lie outside it. "
        f"{int(np.sum(np.abs(phase) < 90))} lie within 90 degrees of phase 0. "
        f"{missing} without a phase. A description and no test."
    )
    chart = style.finished(layers, height_px=320, keys=keys, above_px=20)
    return Figure.of(chart, kind="phases", title=title, caption=" ".join(said), alt=words)


def _are(count: int) -> str:
    return "is" if count == 1 else "are"
