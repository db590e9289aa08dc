"""Sentences that terminal and report share, so that both claim the same and no more than was shown."""

from __future__ import annotations

from layout.noise.calibration import Figure
from layout.outputs.plain import bound_text, fixed, one_line, rounded_up
from layout.outputs.result import DesignResult, RankedLayout, SensorRow
from layout.units import MM

CLOCK_SENTENCE = (
    "The search was stopped by its time allowance: another run may end elsewhere; the bounds hold all the same."
)
RANKED_COLUMNS = (
    "price: sum of the prices; sensors moved: against the nearest earlier rank; equals even spread of: how many "
    "sensors an even spread needs to do as well"
)
HOUSINGS_COLUMN = "housings meet: pairs of housings that would share space"


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
    bound, gap = bound_text(best.bound, result.unit), rounded_up(best.gap_percent, 2)
    passes = "passes" if result.unit == "bits" else "goes below"
    claim = (
        f"No allowed layout of these candidates {passes} {bound} {result.unit} under this model: "
        f"layout 1 is within {gap} %"
    )
    if result.bound_from:
        claim += f" (bound from {result.bound_from})"
    if best.proven:
        return f"{claim}, and so proven to {within} %."
    return f"{claim}. Better layouts may exist inside that gap (proven would mean {within} % or less)."


def reach_sentence(result: DesignResult) -> str:
    """How few sensors reach the target, and what is certain about fewer; "" where that was not asked."""
    reach = result.reach
    if reach is None:
        return ""
    target = f"{reach.target:g} {result.unit}"
    most = max(reach.values)
    if reach.found is None:
        if reach.too_few >= most:
            return f"No allowed layout of {most} sensors or fewer reaches {target}: certified."
        return f"No layout that reaches {target} was found with up to {most} sensors; it is not excluded that one does."
    if reach.found == reach.too_few + 1:
        return f"{_number(reach.found, 'sensor')} reach {target}, and no fewer can: certified."
    return (
        f"{_number(reach.found, 'sensor')} reach {target}; {reach.too_few} or fewer cannot: certified; undecided "
        f"between {reach.too_few + 1} and {reach.found}."
    )


def polished_sentence(result: DesignResult) -> str:
    """What sliding the sensors of layout 1 off the grid gained; "" where that was not asked."""
    polished = result.polished
    if polished is None:
        return ""
    farthest = max(sensor.slid for sensor in polished.sensors) / MM
    gain = fixed(polished.gain_percent, 1)
    return (
        f"Slid off the grid, layout 1 gives {fixed(polished.value, 3)} {result.unit}, {gain} % better (sensors slid by "
        f"up to {fixed(farthest, 1)} mm; polished.csv); the bound covers the grid only."
    )


def effort_sentence(result: DesignResult) -> str:
    """How much was searched for the layouts and for the bound; "" where nothing was counted."""
    effort = result.search_effort
    if not effort:
        return ""
    parts = effort["parts examined"]
    proof = f"{_number(parts, 'part')} examined, {effort['parts left open']} left open" if parts else "not used"
    swaps = f", {_number(effort['swaps'], 'swap')}" if "swaps" in effort else ""
    rounds = f" {_number(effort['bound rounds'], 'round')} of tightening;" if "bound rounds" in effort else ""
    return f"Search: {_number(effort['starts'], 'start')}{swaps}. Bound:{rounds} branch and bound: {proof}."


def housings_sentence(result: DesignResult) -> str:
    """In which layouts housings meet; "" where there are none to meet."""
    meeting = [layout for layout in result.layouts if layout.housings_meet]
    if not meeting:
        return ""
    where = ", ".join(f"{one.housings_meet} in layout {one.rank}" for one in meeting)
    return f"Pairs of housings that meet: {where}; a larger spacing_mm keeps them apart (clashes.csv lists them)."


def figure_text(figure: Figure) -> str:
    """Where a figure lies and what to know about it, "" where there is nothing to say."""
    outside = f"outside the band, {figure.outside} it" if figure.outside else ""
    if not figure.judged:
        outside = f"{figure.outside} the band" if figure.outside else ""
    return one_line("; ".join(filter(None, [outside, figure.remark])))


def nearest_text(row: SensorRow) -> str:
    """The nearest standard position and how far it is from the sensor's place on the scalp."""
    offset = fixed(row.nearest_offset / MM, 1)
    return f"{one_line(row.nearest_name)} " + ("on the spot" if offset == "0.0" else f"{offset} mm")


def meets_housings(result: DesignResult) -> bool:
    """Whether the layouts have housings that could meet."""
    return any(layout.housings_meet is not None for layout in result.layouts)


def _number(count: float, thing: str) -> str:
    return f"{count} {thing}" if count == 1 else f"{count} {thing}s"
