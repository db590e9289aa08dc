"""What a result must say beside its numbers."""

from __future__ import annotations

from layout.anatomy.positions import F3_CONVENTION
from layout.brief.objects import Brief
from layout.design.found import Found
from layout.design.problem import Problem
from layout.design.study import Study
from layout.physics.boundary_cortex import BoundaryCortex
from layout.units import MM, NAM


def notes_of(study: Study, problems: tuple[Problem, ...], found: Found) -> dict[str, tuple[str, ...]]:
    """Heading -> sentences: sites, model, strengths, goal and scenarios, ranking."""
    notes = {
        "Sites": (*study.candidates.notes, *_axis_notes(study.brief), f"Standard positions: {F3_CONVENTION}."),
        "Head and model": study.head.notes,
        "Strengths and noise": (*_strength_notes(study), *_recorded_notes(problems[0]), *_sensor_notes(study.brief)),
        "Goal": (*_goal_notes(study.brief), *_scenario_notes(problems, study.brief)),
        "Ranking": _ranking_notes(found),
    }
    if study.brief.head.lead_field_file is not None:
        notes["Head and model"] += (
            f"Lead field from {study.brief.head.lead_field_file.name}; the strength of the background and the field of "
            "the eyes are set by a quick model of layered spheres.",
        )
    elif isinstance(study.cortex, BoundaryCortex):
        notes["Head and model"] += (f"{study.cortex.note()}; {problems[0].displacements.summary()}.",)
    elif study.head.sphere is None:
        moved = problems[0].displacements.summary()
        notes["Head and model"] += (f"Quick physical model of layered spheres; {moved}.",)
    return notes


def _axis_notes(brief: Brief) -> tuple[str, ...]:
    if not any(entry.kind == "magnetometer" and entry.axes != "normal" for entry in brief.stock):
        return ()
    return (
        "Axes of a magnetometer: normal points out of the head along its housing, tangent1 towards the front as nearly "
        "as the scalp allows, tangent2 (normal x tangent1) to the left on top of the head, down on its left side and "
        "up on its right side.",
        *(
            ("Free axes: the bound covers every direction that the brief allows, not only those of a list.",)
            if any(getattr(entry, "free_axes", 0) for entry in brief.stock)
            else ()
        ),
    )


def _sensor_notes(brief: Brief) -> tuple[str, ...]:
    """What gradiometers measure, and what is assumed about gain errors and crosstalk."""
    notes = []
    if any(entry.kind == "gradiometer" for entry in brief.stock):
        notes.append(
            "Gradiometers read the difference, in tesla, of the field along the normal in two coils: axial, the near "
            "one minus the far one; planar, along tangent1 (gradient1: towards the front) or tangent2 (gradient2: "
            "normal x tangent1), the coil on that side minus the other."
        )
    if any(entry.gain_error > 0 for entry in brief.stock):
        notes.append(
            "Gain errors count as noise of each channel alone, of that share of all that the channel sees at the "
            "assumed strengths; what they make of the common potential of the electrodes is left out."
        )
    if any(entry.crosstalk > 0 for entry in brief.stock):
        notes.append(
            "Crosstalk counts as noise of each channel alone, as if all of it came from the strongest channel that can "
            "be chosen within 50 mm: an upper estimate, which layouts without near neighbours pay too."
        )
    return tuple(notes)


def _strength_notes(study: Study) -> tuple[str, ...]:
    brief = study.brief
    strengths = ", ".join(
        f"{region.name} {one.moment / NAM:g} nAm" for region, one in zip(study.regions, brief.regions, strict=True)
    )
    notes = [f"Bits depend on the assumed strengths ({strengths}); compare layouts by ratios."]
    if any(entry.kind == "electrode" for entry in brief.stock):
        notes.append(
            "The reference is one of the counted electrodes; calling another one the reference changes nothing, and "
            "the ground is not counted."
        )
    return tuple(notes)


def _recorded_notes(problem: Problem) -> tuple[str, ...]:
    recorded = problem.calibration.recorded
    return () if recorded is None else recorded.notes


def _goal_notes(brief: Brief) -> tuple[str, ...]:
    goal, notes = brief.goal, []
    if goal.region_weights:
        weights = ", ".join(f"{name} {weight:g}" for name, weight in goal.region_weights.items())
        notes.append(
            f"Goal: the sum of what is told about each region, the others unknown, times its weight ({weights})."
            if goal.kind == "information"
            else f"Goal: the root of the weighted mean of the regions' mean squared errors (weights: {weights})."
        )
    if goal.kind == "localisation" or goal.error_limits:
        notes.append(
            "Localisation errors are linearised: for a dipole of the region's moment at each of its sources, from the "
            f"information about its place and moment under priors of {goal.position_prior / MM:g} mm per axis and "
            f"{100 * goal.moment_spread:g} % of the moment. Where noise is strong a fit can do worse or better; "
            "simulation says where the figure holds."
        )
    for name, limit in goal.error_limits.items():
        notes.append(f"Rule: the {goal.error_over} linearised error over {name} at most {limit / MM:g} mm.")
    return tuple(notes)


def _scenario_notes(problems: tuple[Problem, ...], brief: Brief) -> tuple[str, ...]:
    notes = []
    if len(problems) > 1:
        names = "; ".join(problem.scenario.name for problem in problems)
        over = "the mean over" if brief.scenarios.judge == "mean" else "the worst of"
        notes.append(
            f"Layouts are judged by {over} {len(problems)} scenarios ({names}). Strengths of background and eyes are "
            "fixed once, on the head as stated. Figures for single regions are those of the head as stated."
        )
    if brief.scenarios.any_one_lost:
        notes.append("Layouts are judged by what is left when the sensor that hurts most has failed.")
    return tuple(notes)


def _ranking_notes(found: Found) -> tuple[str, ...]:
    if len(found.layouts) == 1:
        return ()
    sensors = "1 sensor" if found.differ_by == 1 else f"{found.differ_by} sensors"
    notes = [
        f"Ranked layouts differ from each other by at least {sensors}; a rank's bound covers all layouts that differ "
        "by as much from every earlier rank, among these candidates and under this model."
    ]
    bounds = [layout.bound for layout in found.layouts]
    if len(set(bounds)) < len(bounds):
        notes.append(
            "Ranks share a bound where leaving out the layouts near the earlier ranks did not lower it: a bound for "
            "all layouts holds for the remaining ones too."
        )
    return tuple(notes)
