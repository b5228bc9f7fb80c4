"""The decision, and the sentence that states it.

The order of the questions is the rule, fixed before looking: enough data? - a small adjusted p
under every null, on the claimed side? - if not, would the asserted effect have been seen?
"""

from __future__ import annotations

from epochtest.study.claims import TimingClaim
from epochtest.study.results import FamilyAdjustment, FindingWord, TestResult


def too_few(test: TestResult) -> list[str]:
    """Which of the claim's own minimum counts are not met, one clause each."""
    minimum = test.claim.minimum
    clauses = []
    if test.n_epochs < minimum.epochs:
        clauses.append(f"{test.n_epochs} epochs are fewer than the {minimum.epochs} required")
    if test.n_earthquakes < minimum.earthquakes:
        clauses.append(
            f"{test.n_earthquakes} earthquakes are fewer than the {minimum.earthquakes} required"
        )
    return clauses


def _beyond_reach(claim: TimingClaim, detectable: float | None) -> bool:
    """Whether the asserted effect is smaller than the smallest detectable one."""
    if detectable is None:
        return True
    asserted = claim.asserted_rate_ratio
    if asserted is None:
        return False
    if claim.direction == "fewer":
        return detectable < asserted
    if asserted < 1.0:  # "either" states its detectable ratio above 1; mirror the asserted one
        asserted = 1.0 / asserted
    return detectable > asserted


def decide(
    test: TestResult, family: FamilyAdjustment, alpha: float, detectable_ratio_family: float | None
) -> FindingWord:
    """The finding of one claim.

    "excess" or "deficit": minimum counts met, p_used <= alpha under every null (p_used is never
    below any null's own p), and hits on that side of what every null expects; direction "more"
    can only give an excess, "fewer" only a deficit. "cannot tell": minimum counts not met, or the
    asserted rate ratio is out of the data's reach, or no ratio at all is within it. Else "none
    detected".
    """
    if too_few(test):
        return "cannot tell"
    if family.p_used <= alpha and all(null.p <= alpha for null in test.nulls):
        above = test.hits > test.expected and all(n.observed > n.mean for n in test.nulls)
        below = test.hits < test.expected and all(n.observed < n.mean for n in test.nulls)
        if above and test.claim.direction != "fewer":
            return "excess"
        if below and test.claim.direction != "more":
            return "deficit"
    return "cannot tell" if _beyond_reach(test.claim, detectable_ratio_family) else "none detected"


def sentence(
    finding: FindingWord,
    test: TestResult,
    family: FamilyAdjustment,
    alpha: float,
    detectable_ratio_family: float | None,
) -> str:
    """The finding in plain words, about the tested catalog and span only."""
    effect = test.effect
    parts = [_opening(finding, test, family, alpha, detectable_ratio_family)]
    parts.append(
        f"{test.hits} of {test.n_earthquakes} earthquakes fell inside the windows, "
        f"{test.expected:.1f} would be expected from their coverage alone"
    )
    ratio = "not defined or unbounded" if effect.rate_ratio is None else f"{effect.rate_ratio:.3g}"
    parts.append(
        f"rate ratio {ratio}, {100 * effect.confidence:.3g} % interval "
        f"{_interval(effect.inflated_interval)} widened for clustering, "
        f"{_interval(effect.exact_interval)} if earthquakes were independent"
    )
    claims = "1 claim" if family.claims == 1 else f"{family.claims} claims"
    parts.append(
        f"p used {family.p_used:.3g} at alpha {alpha:g} (correction {family.correction}, {claims})"
    )
    parts.append(_reach(test, detectable_ratio_family))
    return "; ".join(parts) + "."


def _opening(
    finding: FindingWord,
    test: TestResult,
    family: FamilyAdjustment,
    alpha: float,
    detectable: float | None,
) -> str:
    title = f"{finding[0].upper()}{finding[1:]}"
    if finding == "excess":
        return f"{title}: more earthquakes than chance placement of the windows accounts for"
    if finding == "deficit":
        return f"{title}: fewer earthquakes than chance placement of the windows accounts for"
    if finding == "none detected":
        return f"{title}: chance placement of the windows does as well, or the side is not claimed"
    if clauses := too_few(test):
        return f"{title}: {' and '.join(clauses)}"
    asserted = test.claim.asserted_rate_ratio
    if detectable is None or asserted is None:
        return f"{title}: these data could not have shown any rate ratio"
    return f"{title}: the asserted rate ratio {asserted:g} is out of reach of these data"


def _interval(limits: tuple[float, float | None]) -> str:
    low, high = limits
    return f"{low:.3g} and more" if high is None else f"{low:.3g} to {high:.3g}"


def _reach(test: TestResult, detectable: float | None) -> str:
    power = f"{100 * test.effect.power:.3g} % power"
    if detectable is None:
        return f"no rate ratio would have been shown with {power}"
    way = "or less" if test.claim.direction == "fewer" else "or more"
    return f"a rate ratio of {detectable:.3g} {way} would have been shown with {power}"
