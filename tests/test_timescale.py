"""Time scales against Skyfield, Astropy and the leap-second bulletins."""

from __future__ import annotations

import warnings
from datetime import UTC, date, datetime, timedelta, timezone

import astronomy
import erfa
import numpy as np
import pytest
from astropy.time import Time
from astropy.utils import iers
from epochtest.timescale import (
    J2000_JD,
    label_days,
    tdb_days_from_utc,
    tdb_minus_tt_s,
    timescale,
    tt_days_from_utc,
    utc_from_tdb_days,
    utc_from_tt_days,
    utc_instant,
)
from hypothesis import given, seed, settings
from hypothesis import strategies as st

MICROSECOND_DAYS = 1e-6 / 86400.0


def utc(*text: str) -> np.ndarray:
    """Instants from ISO text."""
    return np.array(text, dtype="datetime64[us]")


def tt_minus_utc_s(text: str) -> float:
    """TT minus the civil label in s."""
    instants = utc(text)
    return float((tt_days_from_utc(instants) - label_days(instants))[0] * 86400.0)


# IERS Bulletin C: TAI-UTC from the dates given; TT-TAI is 32.184 s by definition (IAU 1991).
@pytest.mark.parametrize(
    ("text", "tai_minus_utc_s"),
    [
        ("1972-01-01T00:00:00", 10), ("1972-06-30T23:59:59.999999", 10),
        ("1972-07-01T00:00:00", 11), ("1980-01-01", 19), ("1998-12-31T23:59:59", 31),
        ("1999-01-01", 32), ("2005-12-31T23:59:59", 32), ("2006-01-01", 33),
        ("2012-07-01", 35), ("2016-12-31T23:59:59.999999", 36), ("2017-01-01", 37),
        ("2024-06-01", 37),
    ],
)  # fmt: skip
def test_leap_seconds(text: str, tai_minus_utc_s: int) -> None:
    """TT minus UTC is 32.184 s plus the TAI-UTC of IERS Bulletin C, to the microsecond's edge."""
    # Days since J2000.0 resolve 1e-12 day, 0.2 microseconds, at 10,000 days.
    assert tt_minus_utc_s(text) == pytest.approx(32.184 + tai_minus_utc_s, abs=1e-6)


def test_leap_second_is_longer_by_one_second() -> None:
    """From 2016-12-31 23:59:59 to 2017-01-01 00:00:00 UTC two seconds pass (Bulletin C 52)."""
    before, after = tt_days_from_utc(utc("2016-12-31T23:59:59", "2017-01-01T00:00:00"))
    assert (after - before) * 86400.0 == pytest.approx(2.0, abs=1e-6)
    # An instant inside the leap second gets the label of the second that follows.
    inside = utc_from_tt_days(before + 1.5 / 86400.0)
    assert abs(inside - np.datetime64("2017-01-01T00:00:00.5")) <= np.timedelta64(2, "us")


def test_j2000() -> None:
    """J2000.0 is 2000-01-01 11:58:55.816 UTC (IAU 1994 with TAI-UTC = 32 s)."""
    assert tt_days_from_utc(utc("2000-01-01T11:58:55.816"))[0] == pytest.approx(0.0, abs=1e-12)
    assert str(utc_from_tt_days(0.0)) == "2000-01-01T11:58:55.816000"


def test_against_astropy_since_1972() -> None:
    """TT of 500 random UTC instants 1972-2023 equals Astropy's (ERFA), to a microsecond."""
    rng = np.random.default_rng(1)
    start = np.datetime64("1972-01-01", "us")
    instants = start + rng.integers(0, 52 * 365 * 86400 * 10**6, 500).astype("timedelta64[us]")
    # Built-in leap seconds, no network.
    with iers.conf.set_temp("auto_download", False), warnings.catch_warnings():
        warnings.simplefilter("ignore")
        theirs = Time(instants.astype("datetime64[ns]"), scale="utc")
        tt = (theirs.tt.jd1 - J2000_JD) + theirs.tt.jd2
        tdb = (theirs.tdb.jd1 - J2000_JD) + theirs.tdb.jd2
    assert np.abs(tt_days_from_utc(instants) - tt).max() < MICROSECOND_DAYS
    # The two-term series is good to 30 microseconds (Explanatory Supplement 1992).
    assert np.abs(tdb_days_from_utc(instants) - tdb).max() < 40 * MICROSECOND_DAYS


def test_tdb_against_erfa() -> None:
    """TDB-TT follows Fairhead & Bretagnon (1990) as in ERFA within 0.1 ms, 1900-2100.

    The two-term series leaves out the planets' terms, 20 microseconds together nowadays, and
    terms that grow with time.
    """
    days = np.linspace(-36525.0, 36525.0, 2000)
    difference_s = erfa.dtdb(J2000_JD, days, 0.0, 0.0, 0.0, 0.0)
    assert np.abs(tdb_minus_tt_s(days) - difference_s).max() < 1e-4


@pytest.mark.parametrize("year", [1550, 1700, 1850, 1906, 1950, 1971])
def test_before_1972_labels_are_ut1(year: int) -> None:
    """Before 1972 the label is UT1: TT minus it is Skyfield's Delta T at that UT1."""
    text = f"{year}-03-21T06:00:00"
    days_of_label = float(label_days(utc(text))[0])
    scale = timescale()
    theirs = scale.ut1_jd(J2000_JD + days_of_label)
    # A Julian date in one float64 resolves 40 microseconds; Skyfield splits, hence 0.1 ms.
    assert tt_minus_utc_s(text) == pytest.approx(float(theirs.delta_t), abs=1e-4)


# Morrison & Stephenson (2004), table of Delta T, whole seconds, from memory; the second route
# is the polynomials of Espenak & Meeus (2006) as carried by astronomy-engine, in the test.
@pytest.mark.parametrize(
    ("year", "delta_t_s", "tolerance_s"),
    [
        (1600, 120.0, 15.0),
        (1700, 9.0, 6.0),
        (1800, 14.0, 5.0),
        (1900, -3.0, 1.5),
        (1950, 29.0, 1.0),
    ],
)
def test_delta_t_of_the_published_tables(year: int, delta_t_s: float, tolerance_s: float) -> None:
    """Delta T before 1972 stays within the published uncertainty of the historical values."""
    ours = tt_minus_utc_s(f"{year}-01-01")
    polynomial = astronomy.Time.Make(year, 1, 1, 0, 0, 0.0)
    assert ours == pytest.approx(delta_t_s, abs=tolerance_s)
    assert (polynomial.tt - polynomial.ut) * 86400.0 == pytest.approx(delta_t_s, abs=tolerance_s)


def test_far_future_is_ut1() -> None:
    """From 2035 the label is UT1, and the offset joins Delta T's curve: about 69 s then growing."""
    assert tt_minus_utc_s("2034-12-31T23:59:59") == pytest.approx(69.184, abs=1e-6)
    start = float(label_days(utc("2035-01-01"))[0])
    assert tt_minus_utc_s("2035-01-01") == pytest.approx(
        float(timescale().ut1_jd(J2000_JD + start).delta_t), abs=1e-4
    )
    far = tt_minus_utc_s("2650-01-01")
    days = float(label_days(utc("2650-01-01"))[0])
    assert far == pytest.approx(float(timescale().ut1_jd(J2000_JD + days).delta_t), abs=1e-4)
    assert far == pytest.approx(1886.0, abs=1.0)


@pytest.mark.parametrize("edge", ["1972-01-01", "2035-01-01"])
def test_joints_are_small(edge: str) -> None:
    """Where leap seconds and UT1 meet the step is under a second in 1972, a few s in 2035."""
    middle = np.datetime64(edge, "us")
    one = np.timedelta64(1, "us")
    before, after = tt_days_from_utc(np.array([middle - one, middle]))
    step_s = (after - before) * 86400.0
    assert abs(step_s) < (0.9 if edge.startswith("1972") else 3.0)  # |UT1-UTC| < 0.9 s, Rec. 460


@seed(2)
@settings(max_examples=300, deadline=None)
@given(
    st.datetimes(min_value=datetime(1550, 1, 1), max_value=datetime(2649, 12, 31)),
)
def test_round_trip(moment: datetime) -> None:
    """UTC to TDB days and back returns the instant within the spacing of float64 days.

    16 microseconds of slack at 160,000 days (spacing 2.5 microseconds, five roundings). The
    3 s about 2035, where labels overlap or lack, are left out: no clock shows them twice.
    """
    if abs(moment - datetime(2035, 1, 1)) < timedelta(seconds=4):
        return
    if abs(moment - datetime(1972, 1, 1)) < timedelta(seconds=4):
        return
    instant = np.datetime64(moment, "us")
    for there, back in (
        (tt_days_from_utc, utc_from_tt_days),
        (tdb_days_from_utc, utc_from_tdb_days),
    ):
        off = np.abs(back(there(instant)) - instant)
        assert off <= np.timedelta64(16, "us")


def test_order_is_kept() -> None:
    """Later labels get later TT, every ten days from 1550 to 2650."""
    start, end = np.datetime64("1550-01-01", "us"), np.datetime64("2650-01-01", "us")
    instants = np.arange(start, end, np.timedelta64(10, "D"))
    assert (np.diff(tt_days_from_utc(instants)) > 0.0).all()


def test_shapes_and_missing_values() -> None:
    """Shapes are kept, NaT and NaN answer each other, and inputs are not changed."""
    table = utc("2000-01-01", "NaT", "1900-05-05", "2600-01-01").reshape(2, 2)
    copy = table.copy()
    days = tt_days_from_utc(table)
    assert days.shape == (2, 2)
    assert np.isnan(days).tolist() == [[False, True], [False, False]]
    back = utc_from_tt_days(days)
    assert np.isnat(back).tolist() == [[False, True], [False, False]]
    assert np.array_equal(table, copy, equal_nan=True)
    assert tt_days_from_utc(np.datetime64("2000-01-01")).shape == ()
    assert tt_days_from_utc(np.empty(0, dtype="datetime64[us]")).shape == (0,)


@pytest.mark.parametrize(
    ("value", "expected"),
    [
        ("2020-12-21", "2020-12-21T00:00:00"),
        ("2020-12-21T18:20:00Z", "2020-12-21T18:20:00"),
        ("2020-12-21 18:20:00.25", "2020-12-21T18:20:00.25"),
        ("2020-12-21T23:20:00-05:30", "2020-12-22T04:50:00"),
        ("2020-01-01T01:00:00+09:00", "2019-12-31T16:00:00"),
        (date(1906, 4, 18), "1906-04-18T00:00:00"),
        (datetime(2000, 1, 1, 12), "2000-01-01T12:00:00"),
        (datetime(2000, 1, 1, 12, tzinfo=UTC), "2000-01-01T12:00:00"),
        (datetime(2000, 1, 1, 12, tzinfo=timezone(timedelta(hours=14))), "1999-12-31T22:00:00"),
        (np.datetime64("2000-01-01", "D"), "2000-01-01T00:00:00"),
    ],
)
def test_instants_from_text_and_dates(value: object, expected: str) -> None:
    """Offsets of ISO 8601 are honoured, none means UTC, dates mean midnight."""
    instant = utc_instant(value)  # type: ignore[arg-type]
    assert instant == np.datetime64(expected, "us")
    assert instant.dtype == np.dtype("datetime64[us]")


@pytest.mark.parametrize("text", ["", "yesterday", "2020-13-01", "2020-02-30", "21/12/2020"])
def test_text_that_is_no_instant(text: str) -> None:
    """Text that is no ISO 8601 date or time raises ValueError."""
    with pytest.raises(ValueError, match=r"Invalid isoformat|month|day"):
        utc_instant(text)
