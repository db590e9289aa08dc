"""Sentences that terminal and report share, so that both claim the same and no more than was shown."""

from __future__ import annotations

from layout.outputs.plain import fixed, rounded_up
from layout.outputs.result import DesignResult, RankedLayout

CLOCK_SENTENCE = (
    "The search was stopped by its time allowance: another run may end elsewhere; the bounds hold all the same."
)


def even_spread_text(layout: RankedLayout) -> str:
    """The size of the even spread that does as well, or that even the largest tried does not; "-" where none was."""
    count = layout.equals_even_spread_of
    if count is None and layout.even_spread_limit == 0:
        return "-"
    return f"more than {layout.even_spread_limit}" if count is None else str(count)


def bound_sentence(result: DesignResult) -> str:
    """What the certificate says about rank 1."""
    best = result.layouts[0]
    within = fixed(result.proven_within, 2).rstrip("0").rstrip(".")
    bound, gap = rounded_up(best.bound, 3), rounded_up(best.gap_percent, 2)
    claim = (
        f"No allowed layout of these candidates passes {bound} {result.unit} under this model: "
        f"layout 1 is within {gap} %"
    )
    if best.proven:
        return f"{claim}, and so proven to {within} %."
    return f"{claim}. Better layouts may exist inside that gap (proven would mean {within} % or less)."
