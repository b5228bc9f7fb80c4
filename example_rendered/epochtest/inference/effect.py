"""How large: the rate inside the windows over the rate outside, with its intervals.

Given n earthquakes in all, the number inside is binomial with share p = R f / (1 - f + R f) if
they are independent, where f is the coverage and R the rate ratio (two Poisson rates;
Przyborowski & Wilenski 1940). Clopper & Pearson's (1934) limits of p, turned back into R, give
the exact interval. Earthquakes come in clusters, so a second interval counts only hits / phi
of n / phi earthquakes, phi being the variance inflation measured by the null (never below 1).
"""

from __future__ import annotations

import numpy as np
from scipy.special import betainc, betaincinv, gammaln, xlog1py, xlogy

from epochtest.study.claims import Direction

TIE_TOLERANCE = 1e-7
"""Relative slack when probabilities are compared, so that equal ones count as equal."""

RatioInterval = tuple[float, float | None]


def _ratio(share: float, coverage: float) -> float | None:
    """Rate ratio of the share of earthquakes inside; None stands for infinity."""
    if share >= 1.0:
        return None
    return share * (1.0 - coverage) / (coverage * (1.0 - share))


def rate_ratio(hits: int, n: int, coverage: float) -> float | None:
    """Rate inside over rate outside; None if it is infinite or not defined.

    It is not defined without earthquakes, or if windows cover nothing or everything.
    """
    if n == 0 or not 0.0 < coverage < 1.0:
        return None
    return _ratio(hits / n, coverage)


def ratio_interval(
    hits: int, n: int, coverage: float, confidence: float, inflation: float = 1.0
) -> RatioInterval:
    """Confidence interval of the rate ratio; an upper limit of None is unbounded.

    With ``inflation`` 1 it is exact; above 1, hits and n are divided by it (an approximation
    that holds for many clusters).
    """
    if n == 0 or not 0.0 < coverage < 1.0:
        return 0.0, None
    phi = max(inflation, 1.0)
    inside, outside = hits / phi, (n - hits) / phi
    tail = (1.0 - confidence) / 2.0
    low = float(betaincinv(inside, outside + 1.0, tail)) if hits > 0 else 0.0
    high = float(betaincinv(inside + 1.0, outside, 1.0 - tail)) if hits < n else 1.0
    lower = _ratio(low, coverage)
    assert lower is not None
    return lower, _ratio(high, coverage)


def binomial_p(hits: int, n: int, coverage: float, direction: Direction) -> float:
    """p of the plain binomial test: it takes every earthquake for independent, so beware.

    Direction "either" sums the probabilities of all outcomes no likelier than the observed.
    """
    if n == 0 or not 0.0 < coverage < 1.0:
        return 1.0
    if direction == "more":
        return float(betainc(hits, n - hits + 1, coverage)) if hits > 0 else 1.0
    if direction == "fewer":
        return float(betainc(n - hits, hits + 1, 1.0 - coverage)) if hits < n else 1.0
    k = np.arange(n + 1)
    log_p = gammaln(n + 1) - gammaln(k + 1) - gammaln(n - k + 1)
    log_p += xlogy(k, coverage) + xlog1py(n - k, -coverage)
    return float(min(1.0, np.exp(log_p[log_p <= log_p[hits] + TIE_TOLERANCE]).sum()))
