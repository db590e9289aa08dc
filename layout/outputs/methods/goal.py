"""The paragraphs of the methods about the goal, the search with its bound, and what the layout reaches."""

from __future__ import annotations

from layout.outputs.methods.sources import cite
from layout.outputs.plain import bound_text, fixed, one_line, rounded_up
from layout.outputs.result import DesignResult
from layout.outputs.words import reach_sentence
from layout.units import MM, PERCENT


def goal_paragraph(result: DesignResult) -> str:
    """What a layout was judged by."""
    goal, scenarios = result.brief.goal, result.brief.scenarios
    sentences = [_information(result) if goal.kind == "information" else _localisation(result)]
    for name, limit in goal.error_limits.items():
        sentences.append(
            f"Layouts were allowed only where the {goal.error_over} linearised localisation error over "
            f"{one_line(name)} was at most {limit / MM:g} mm {cite('error bound')}."
        )
    others = (
        (len(scenarios.conductivities), "other conductivities"),
        (len(scenarios.heads), "other head sizes"),
        (len(scenarios.noise_factors) + len(scenarios.sensor_noise_factors), "other noise levels"),
        (len(scenarios.background_factors), "other levels of the background"),
        (scenarios.poses, "random errors of pose"),
    )
    told = [f"{count} with {what}" for count, what in others if count]
    if told:
        judge = "the mean over" if scenarios.judge == "mean" else "the worst of"
        sources = f" {cite('head sizes')}" if scenarios.heads else ""
        sentences.append(f"A layout was judged by {judge} the stated case and {', '.join(told)}{sources}.")
    if scenarios.any_one_lost:
        sentences.append("It was judged by what is left when the sensor that hurts most has failed.")
    return " ".join(sentences)


def _information(result: DesignResult) -> str:
    goal = result.brief.goal
    if goal.region_weights:
        weights = ", ".join(f"{one_line(name)} {weight:g}" for name, weight in goal.region_weights.items())
        joint = f"each region's own, the others a nuisance, summed with weights ({weights})"
    else:
        joint = "joint over the regions"
    return (
        "The goal was the Shannon information, in bits per sample, that the sensors' readings carry about the "
        f"strengths of the regions' sources under Gaussian signals and noise {cite('information')}, {joint}: half the "
        "log2 of the ratio of the determinants of the covariance of the readings with and without the regions' "
        "activity."
    )


def _localisation(result: DesignResult) -> str:
    goal = result.brief.goal
    over = {"rms": "root mean square", "worst": "worst"}[goal.error_over]
    if goal.region_weights:
        weights = ", ".join(f"{one_line(name)} {weight:g}" for name, weight in goal.region_weights.items())
        over += f" over the regions with weights ({weights})"
    else:
        over += " over the regions' sources"
    return (
        "The goal was a linearised Bayesian localisation error in mm, the smaller the better: for a dipole of the "
        "region's moment at each of its sources, the root of the trace of the position block of the inverse "
        f"information matrix, with Gaussian priors of {goal.position_prior / MM:g} mm per axis on the position and of "
        f"{goal.moment_spread / PERCENT:g} % on the moment, {over}. With wide priors it is the Cramér-Rao bound "
        f"{cite('error bound')}; where noise is strong an actual fit can do worse."
    )


def search_paragraph(result: DesignResult) -> str:
    """How layouts were found, and what certifies them."""
    effort, search = result.search_effort, result.brief.search
    starts = effort.get("starts", search.starts)
    sentences = [
        f"Layouts were searched by greedy construction and exchange {cite('exchange')} from {starts} "
        f"start{'' if starts == 1 else 's'}.",
        "A limit that no allowed layout can pass came from the concave relaxation of the choice to fractional weights "
        f"{cite('design')}",
    ]
    if "rank-aware" in result.bound_from:
        sentences[-1] += f", tightened by the number of channels {cite('rank')}"
    if "branch and bound" in result.bound_from:
        sentences[-1] += f" and from branch and bound {cite('branch')} ({effort['parts examined']} parts examined)"
    sentences[-1] += "; it holds for these candidates under this model."
    if result.stopped_by_clock:
        sentences.append("The search was stopped by a time allowance.")
    return " ".join(sentences)


def value_paragraph(result: DesignResult) -> str:
    """What layout 1 gives, its certificate, and the baselines."""
    best, unit = result.layouts[0], result.unit
    sensors = sum(row.role != "ground" for row in best.sensors)
    limit = "upper" if unit == "bits" else "lower"
    proven = f"within the {result.proven_within:g} % called proven" if best.proven else "not proven optimal"
    sentences = [
        f"The layout of rank 1 (of {len(result.layouts)} ranked) has {sensors} sensors and gives "
        f"{fixed(best.value, 3)} {unit}; the certified {limit} bound is {bound_text(best.bound, unit)} {unit}, a gap "
        f"of {rounded_up(best.gap_percent, 2)} % ({proven})."
    ]
    if result.baselines:
        parts = [
            f"{one_line(base.name)} {fixed(base.value, 3)}{f' ({one_line(base.note)})' if base.note else ''}"
            for base in result.baselines
        ]
        sentences.append(f"Without a search, as many sensors give, in {unit}: {'; '.join(parts)}.")
    if best.equals_even_spread_of is not None:
        sentences.append(f"An even spread needs {best.equals_even_spread_of} sensors to do as well.")
    elif best.even_spread_limit:
        sentences.append(f"Even spreads of up to {best.even_spread_limit} sensors do not do as well.")
    if reach := reach_sentence(result):
        sentences.append(reach)
    if result.polished is not None:
        polished = result.polished
        sentences.append(
            f"Slid off the grid, the same sensors give {fixed(polished.value, 3)} {unit}, which the bound does not "
            "cover."
        )
    if unit == "bits":
        sentences.append("Bits depend on the assumed strengths and serve for comparisons between layouts by ratios.")
    return " ".join(sentences)
