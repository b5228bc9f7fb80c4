"""How numbers are written in tables, charts and the terminal: one place for all of them.

A p-value is never written as 0 (a Monte Carlo p-value cannot be 0: Phipson & Smyth 2010);
thousands are set apart by a thin space and not by a comma or point, as ISO 80000-1 asks.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

NOTHING = "–"
THIN_SPACE = "\u2009"
MINUS = "\u2212"
SMALLEST_P = 0.001


def _missing(value: float | None) -> bool:
    return value is None or math.isnan(value)


def count(value: int | None) -> str:
    """A whole number with thin spaces between thousands: 46 716."""
    return NOTHING if value is None else signed(f"{int(value):,}".replace(",", THIN_SPACE))


def counted(value: int, noun: str, *, plain: bool = False) -> str:
    """A number of things: "1 epoch", "46 716 epochs"; ``plain`` (for speech) without spaces."""
    number = str(value) if plain else count(value)
    return f"{number} {noun}" if value == 1 else f"{number} {noun}s"


def decimal(value: float | None, places: int = 1) -> str:
    """A number with ``places`` decimals and thin spaces between thousands."""
    if value is None or math.isnan(value):
        return NOTHING
    if math.isinf(value):
        return "∞" if value > 0 else f"{MINUS}∞"
    return signed(f"{value:,.{places}f}".replace(",", THIN_SPACE))


def signed(text: str) -> str:
    """A number's text with a real minus sign; minus zero loses its sign."""
    if text.startswith("-"):
        return MINUS + text[1:] if any(digit in text for digit in "123456789") else text[1:]
    return text


def p_value(p: float | None) -> str:
    """A p-value with three significant digits; below 0.001 only that it is below.

    Raises ValueError for a number outside 0..1, which is no p-value.
    """
    if p is None or math.isnan(p):
        return NOTHING
    if not 0.0 <= p <= 1.0:
        raise ValueError(f"a p-value lies in 0..1, found {p}; check the test that made it")
    if p < SMALLEST_P:
        return f"< {SMALLEST_P}"
    if p >= 0.1:
        return f"{p:.2f}" if p >= 0.9995 else f"{p:.3f}"
    return f"{p:.4f}" if p >= 0.01 else f"{p:.5f}"


def p_phrase(p: float | None) -> str:
    """A p-value with its letter: "p = 0.0412", "p < 0.001"."""
    text = p_value(p)
    return f"p {text}" if text.startswith("<") else f"p = {text}"


def ratio(value: float | None) -> str:
    """A rate ratio with two decimals."""
    return decimal(value, 2)


def interval(bounds: Sequence[float | None] | None, places: int = 2) -> str:
    """An interval "0.84–1.21"; an upper end of None (or inf) is unbounded: "0.84–∞"."""
    if bounds is None:
        return NOTHING
    low, high = bounds
    if low is None or _missing(low):
        return NOTHING
    return f"{decimal(low, places)}–{decimal(math.inf if high is None else high, places)}"


def percent(share: float | None, places: int = 1) -> str:
    """A share 0..1 in per cent."""
    return (
        NOTHING if share is None or math.isnan(share) else f"{decimal(100 * share, places)}\u00a0%"
    )


def days(value: float | None) -> str:
    """A number of days, with as many decimals as it needs (two at most)."""
    if value is None or math.isnan(value):
        return NOTHING
    text = f"{value:,.2f}".rstrip("0").rstrip(".").replace(",", THIN_SPACE)
    return signed(text)
