"""Windows on the grid and in exact time."""

from __future__ import annotations

import numpy as np
import pytest
from epochtest.errors import ProtocolError
from epochtest.inference.superposed import test_timing as run_timing
from epochtest.inference.windows import (
    Grid,
    bin_counts,
    coverage,
    epochs_reaching,
    exact_hits,
    merge_intervals,
    summarise_epochs,
    window_mask,
)
from epochtest.study.claims import TimingClaim
from epochtest.study.events import MoonPhase
from epochtest.study.settings import InferenceSettings
from hypothesis import given, settings
from hypothesis import strategies as st

START = np.datetime64("2001-03-01", "us")
SPAN = (START, START + np.timedelta64(20, "D"))
HOUR = np.timedelta64(1, "h")

hours = st.lists(st.integers(-200 * 60, 700 * 60), max_size=12)  # minutes from the start
windows = st.tuples(st.integers(-200, 200), st.integers(1, 200))  # first lag, length, in hours/2


def at(minutes: list[int]) -> np.ndarray:
    """Instants that many minutes after the start."""
    return START + np.array(minutes, dtype="timedelta64[m]").astype("timedelta64[us]")


@given(epochs=hours, window=windows)
@settings(max_examples=60, deadline=None)
def test_mask_equals_a_plain_loop(epochs: list[int], window: tuple[int, int]) -> None:
    """A bin is marked exactly if its centre is in some window: a slow twin by definition."""
    grid = Grid.over(SPAN, 1.0)
    first, length = window[0] / 48, window[1] / 48
    mask = window_mask(grid, at(epochs), (first, first + length))
    lags = [np.timedelta64(round(x * 86400e6), "us") for x in (first, first + length)]
    for i in range(grid.n):
        centre = START + i * HOUR + np.timedelta64(30, "m")
        slow = any(epoch + lags[0] <= centre < epoch + lags[1] for epoch in at(epochs))
        assert mask[i] == slow


@given(epochs=hours, times=hours, window=windows)
@settings(max_examples=60, deadline=None)
def test_exact_hits_and_coverage_equal_a_plain_loop(
    epochs: list[int], times: list[int], window: tuple[int, int]
) -> None:
    """Hits count each earthquake once; coverage is the measure of the union: slow twins."""
    first, length = window[0] / 48, window[1] / 48
    days = (first, first + length)
    lags = [np.timedelta64(round(x * 86400e6), "us") for x in days]
    slow = sum(any(e + lags[0] <= t < e + lags[1] for e in at(epochs)) for t in at(times))
    assert exact_hits(at(times), at(epochs), days) == slow
    # All edges lie on whole minutes, so a minute is inside if its first instant is.
    minutes = START + np.arange(20 * 1440).astype("timedelta64[m]")
    inside = np.zeros(minutes.size, dtype=bool)
    for e in at(epochs):
        inside |= (e + lags[0] <= minutes) & (minutes < e + lags[1])
    assert coverage(at(epochs), days, SPAN) == pytest.approx(inside.mean(), abs=1e-12)


def test_window_is_closed_at_its_first_and_open_at_its_last_lag() -> None:
    """The half-open rule, by its definition, to the microsecond."""
    epoch = np.array([START])
    day, tick = np.timedelta64(1, "D"), np.timedelta64(1, "us")
    times = np.array([START + day, START + 2 * day - tick, START + 2 * day, START + day - tick])
    assert [exact_hits(times[[k]], epoch, (1.0, 2.0)) for k in range(4)] == [1, 1, 0, 0]


def test_overlapping_windows_count_an_earthquake_once() -> None:
    """Two windows over one earthquake give one hit: a union by definition."""
    assert exact_hits(at([100]), at([0, 30, 60]), (0.0, 1.0)) == 1


def test_touching_intervals_join_and_empty_ones_vanish() -> None:
    """The union of half-open intervals, worked by hand."""
    starts, ends = merge_intervals(np.array([5, 0, 9, 2, 20]), np.array([7, 2, 9, 5, 21]))
    assert starts.tolist() == [0, 20]
    assert ends.tolist() == [7, 21]


def test_grid_states_the_remainder_and_bins_keep_every_earthquake_inside() -> None:
    """A span of 20 days in bins of 7 h leaves 4 h over: division by hand."""
    grid = Grid.over(SPAN, 7.0)
    assert (grid.n, grid.remainder_hours) == (68, 4.0)
    times = at([0, 419, 420, 68 * 420 - 1, 68 * 420, -1])
    counts = bin_counts(grid, times)
    assert counts.sum() == 4
    assert (counts[0], counts[1], counts[67]) == (2, 1, 1)


def test_step_longer_than_the_span_is_refused_with_the_value() -> None:
    """A grid that does not fit gives a sentence with the value found."""
    with pytest.raises(ProtocolError, match=r"step of 24.0 h does not fit into the span of 5 h"):
        Grid.over((START, START + 5 * HOUR), 24.0)
    with pytest.raises(ProtocolError, match="choose a coarser step"):
        Grid.over((START, START + np.timedelta64(20000, "D")), 0.001)


def test_missing_instants_are_refused_with_their_row() -> None:
    """NaT among the epochs is named, not sorted away."""
    with pytest.raises(ProtocolError, match="epochs: entry 1 of 2 has no time"):
        exact_hits(at([0]), np.array([START, np.datetime64("NaT")]), (0.0, 1.0))


def test_epochs_outside_whose_window_reaches_in_are_kept() -> None:
    """Only windows that share an instant with [start, end) count, edges excluded: by hand."""
    days = [-3, -2, 0, 19, 20]
    kept = epochs_reaching(at([d * 1440 for d in days]), (0.0, 3.0), SPAN)
    assert kept.tolist() == at([d * 1440 for d in days[1:4]]).tolist()


def test_summary_of_an_event_set() -> None:
    """Counts, gaps, coverage, overlaps (touching is none) of five epochs, worked by hand."""
    span = (np.datetime64("2000-01-01", "us"), np.datetime64("2003-01-01", "us"))
    days = ["2002-06-01", "1999-12-31", "2000-05-01", "2000-05-03", "2000-05-06", "2010-01-01"]
    epochs = np.array(days, "datetime64[us]")
    result = summarise_epochs(
        claim="made-up",
        description="six dates",
        frame="dates as listed",
        ephemeris="none",
        searched=span,
        epochs_utc=epochs,
        window_days=(0.0, 3.0),
        span=span,
    )
    assert (result.n_epochs, result.n_in_span, result.overlapping_windows) == (5, 4, 1)
    assert result.per_year == {"2000": 3, "2001": 0, "2002": 1}
    assert (result.shortest_interval_days, result.longest_interval_days) == (2.0, 756.0)
    assert result.mean_interval_days == pytest.approx(883 / 4)
    # 2 days of the first window, then 8 days of three joined ones, then 3, of 1096 days.
    assert result.coverage == pytest.approx(13 / 1096)
    assert result.searched_from_utc == "2000-01-01T00:00:00Z"


def test_a_result_that_rests_on_one_sequence_says_so() -> None:
    """Forty hits in one window out of fifty are named; fifty spread over fifty windows are not.

    The thresholds (a fifth of all hits, at least ten) are this project's own.
    """
    span = (np.datetime64("2000-01-01", "us"), np.datetime64("2010-01-01", "us"))
    epochs = span[0] + np.arange(30, 3630, 60) * np.timedelta64(1, "D")
    claim = TimingClaim(
        id="x", title="x", statement="x", event=MoonPhase(phases=("full",)), window_days=(0.0, 3.0)
    )
    hour = np.timedelta64(1, "h")
    swarm = np.concatenate([epochs[7] + np.arange(1, 41) * hour, epochs[10:20] + hour])
    spread = epochs[:50] + hour
    for hits, expected in ((swarm, True), (spread, False)):
        times = hits
        result, _ = run_timing(claim, times, epochs, span, InferenceSettings(grid_hours=6.0))
        assert result.hits == 50
        assert any("40 of the 50 hits" in text for text in result.warnings) is expected
