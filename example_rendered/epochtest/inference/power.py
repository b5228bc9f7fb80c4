"""How small an effect the data could have shown (normal approximation).

With coverage f, n earthquakes and variance inflation phi, hits of a rate ratio R have the share
p1 = R f / (1 - f + R f). The claim is found with the stated power if

    n (p1 - f) = sqrt(phi) [ z_crit sqrt(n f (1 - f)) + z_power sqrt(n p1 (1 - p1)) ]

(sample size for one proportion, common practice; phi replaces the binomial variance by the
null's own). Exact power at the resulting n is .75-.79 for a stated .80 without clustering.
"""

from __future__ import annotations

import math

from scipy.special import ndtri

from epochtest.study.claims import Direction


def normal_critical(alpha: float, direction: Direction) -> float:
    """Standard normal critical value: one-sided, or two-sided for "either"."""
    return float(ndtri(1.0 - (alpha / 2.0 if direction == "either" else alpha)))


def detectable_ratio(
    n: int,
    f: float,
    inflation: float,
    critical_z: float,
    power: float,
    direction: Direction = "more",
) -> float | None:
    """Rate ratio nearest to 1 that is found with ``power``; None if no ratio is.

    ``critical_z`` is the critical value of the standardised hit count. For "fewer" the ratio is
    below 1; for "either" (give the two-sided value) it is the one above 1. An inflation below 1
    counts as 1.
    """
    if n <= 0 or not 0.0 < f < 1.0 or not math.isfinite(critical_z):
        return None
    sign = -1.0 if direction == "fewer" else 1.0
    phi = max(inflation, 1.0)
    z_power = float(ndtri(power))
    # Squared and sorted by powers of p1 the condition is a quadratic. Its two roots lie on
    # either side of g, where the squared bracket vanishes; z_power's sign tells which is ours.
    g = f + sign * critical_z * math.sqrt(phi * f * (1.0 - f) / n)
    if not 0.0 < g < 1.0:
        return None
    b2 = phi * z_power**2 / n
    root = math.sqrt(b2 * (b2 + 4.0 * g * (1.0 - g)))
    side = sign * math.copysign(1.0, z_power)
    p1 = (2.0 * g + b2 + side * root) / (2.0 * (1.0 + b2))
    if p1 >= 1.0 or p1 <= 0.0:
        return None
    return p1 * (1.0 - f) / (f * (1.0 - p1))


def events_needed(
    ratio: float, f: float, inflation: float, critical_z: float, power: float
) -> int | None:
    """Earthquakes with which a rate ratio (above or below 1) is found with ``power``.

    None for a ratio of 1 and for a coverage of 0 or 1.
    """
    if ratio == 1.0 or not 0.0 < f < 1.0:
        return None
    p1 = ratio * f / (1.0 - f + ratio * f)
    reach = critical_z * math.sqrt(f * (1.0 - f)) + float(ndtri(power)) * math.sqrt(p1 * (1.0 - p1))
    return math.ceil(max(inflation, 1.0) * (reach / (p1 - f)) ** 2)
