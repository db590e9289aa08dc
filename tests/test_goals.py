"""Goals, scenarios and rules of a brief, end to end, against direct computations on the same rows."""

from dataclasses import replace

import numpy as np
import pytest
from studies import BAND, SPHERE, TWO_REGIONS, brief_of, coils, cups

from layout.design import build_problem, design, lay_out_study
from layout.design.scenarios import own_scenario, scenarios
from layout.engine.information import information
from layout.engine.localisation import linearised_errors
from layout.errors import InfeasibleError

QUICK = "[search]\nstarts = 3\nranked = 2\nproof_parts = 20\n"
FEW = (SPHERE, TWO_REGIONS, cups(6, 'family = "10-20"'), BAND, QUICK)
FIELD = (SPHERE, TWO_REGIONS, coils(5, "grid_mm = 40"), BAND, QUICK)


def goal(*lines):
    return "\n".join(["[goal]", *lines, ""])


def problems_of(brief):
    study = lay_out_study(brief)
    return study, [build_problem(study, scenario=one) for one in scenarios(study)]


@pytest.mark.slow
@pytest.mark.parametrize("tables", [FEW, FIELD])
@pytest.mark.parametrize("over", ["rms", "worst"])
def test_localisation_is_reported_in_mm_and_bounded_from_below(tables, over):
    brief = brief_of(*tables, goal('kind = "localisation"', f'error_over = "{over}"'))
    result = design(brief)
    _, (problem,) = problems_of(brief)
    assert result.unit == "mm"
    for layout in result.layouts:
        errors = linearised_errors(problem.localisation, np.array(layout.chosen))
        share = problem.localisation.share
        expected = np.sqrt(share @ errors**2) if over == "rms" else errors.max()
        assert layout.value == pytest.approx(1e3 * expected, rel=1e-9)
        assert layout.bound <= layout.value
        assert layout.gap_percent == pytest.approx(100 * (layout.value - layout.bound) / layout.value)
        worst = max(figure.error_worst for figure in layout.per_region.values())
        assert worst == pytest.approx(errors.max(), rel=1e-9, abs=0)
        assert all(sensor.worth >= -1e-9 for sensor in layout.sensors)
    values = [layout.value for layout in result.layouts]
    assert values == sorted(values)
    saturated = 1e3 * np.sqrt(3) * brief.goal.position_prior  # 52 mm: nothing known but the prior
    assert values[-1] < saturated
    for baseline in result.baselines:
        assert values[0] - 1e-9 <= baseline.value <= saturated + 1e-9


def test_weights_of_regions_treat_the_others_as_nuisance():
    brief = brief_of(*FEW, goal('region_weights = { "left" = 3, "right" = 0.5 }'))
    result = design(brief)
    _, (problem,) = problems_of(brief)
    for layout in result.layouts:
        chosen = np.array(layout.chosen)
        each = {name: information(problem.one_region(name), chosen) for name in ("left", "right")}
        assert layout.value == pytest.approx(3 * each["left"] + 0.5 * each["right"], rel=1e-9)
        assert layout.bound >= layout.value
    other = design(brief_of(*FEW, goal('region_weights = { "left" = 0, "right" = 1 }')))
    assert other.layouts[0].per_region["right"].bits > result.layouts[0].per_region["right"].bits


@pytest.mark.slow
@pytest.mark.parametrize("judge", ["mean", "worst"])
def test_scenarios_are_averaged_or_the_worst_taken(judge):
    lines = f'[scenarios]\njudge = "{judge}"\nnoise_factors = [2.0]\nbackground_factors = [0.5]\n'
    lines += "conductivities_s_per_m = [[0.33, 0.02, 0.33]]\npose_error_mm = 5\npose_draws = 2\n"
    brief = brief_of(*FEW, lines)
    result = design(brief)
    _, problems = problems_of(brief)
    assert len(problems) == 6
    for layout in result.layouts:
        values = [information(problem.model, np.array(layout.chosen)) for problem in problems]
        assert len({round(value, 6) for value in values}) == 6  # every scenario differs
        expected = np.mean(values) if judge == "mean" else min(values)
        assert layout.value == pytest.approx(expected, rel=1e-9)
        assert layout.bound >= layout.value - 1e-9
    assert "6 scenarios" in result.notes["Goal"][0]


def test_doubling_all_noise_quarters_the_signal_to_noise():
    study, (own, doubled) = problems_of(brief_of(*FEW, "[scenarios]\nnoise_factors = [2.0]\n"))
    np.testing.assert_allclose(doubled.model.target, own.model.target / 2, rtol=1e-12)
    np.testing.assert_allclose(doubled.model.nuisance, own.model.nuisance, rtol=1e-12)
    assert study.head.sphere is not None


@pytest.mark.slow
def test_the_loss_of_any_one_sensor_is_the_least_of_what_is_left():
    brief = brief_of(*FIELD, "[scenarios]\nany_one_lost = true\n")
    result = design(brief)
    _, (problem,) = problems_of(brief)
    for layout in result.layouts:
        chosen = np.array(layout.chosen)
        left = min(information(problem.model, np.delete(chosen, i)) for i in range(len(chosen)))
        assert layout.value == pytest.approx(left, rel=1e-9)
        assert layout.bound >= left
    plain = design(brief_of(*FIELD))
    without = min(information(problem.model, np.delete(np.array(plain.layouts[0].chosen), i)) for i in range(5))
    assert result.layouts[0].value >= without - 1e-9


@pytest.mark.slow
def test_limits_on_errors_are_kept_or_refused():
    free = design(brief_of(*FIELD, goal("error_limits_mm = { left = 51.9 }")))
    error = 1e3 * free.layouts[0].per_region["left"].error_rms
    limit = 0.97 * error
    tight = design(brief_of(*FIELD, goal(f"error_limits_mm = {{ left = {limit} }}")))
    for layout in tight.layouts:
        assert 1e3 * layout.per_region["left"].error_rms <= limit + 1e-9
    assert tight.layouts[0].value <= free.layouts[0].value + 1e-9
    assert tight.layouts[0].bound >= tight.layouts[0].value
    with pytest.raises(InfeasibleError, match=r"error_limits_mm.*no allowed layout can"):
        design(brief_of(*FIELD, goal("error_limits_mm = { left = 0.5 }")))


def test_the_smallest_count_that_reaches_a_target():
    full = design(brief_of(*FEW)).layouts[0]
    tables = (SPHERE, TWO_REGIONS, cups(8, 'family = "10-20"'), BAND, QUICK)
    result = design(brief_of(*tables, goal(f"reach_bits = {full.value * 0.999}")))
    assert result.reach.found == len(result.layouts[0].sensors) <= 6
    assert result.layouts[0].value >= result.reach.target
    assert result.reach.too_few < result.reach.found
    assert all(result.reach.bounds[count] >= value for count, value in result.reach.values.items())
    far = design(brief_of(*tables, goal("reach_bits = 500")))
    assert far.reach.found is None
    assert far.reach.too_few == 8
    assert len(far.layouts[0].sensors) == 8


def test_a_budget_with_blocks_of_channels():
    priced = cups(12, 'family = "10-20"', "price = 10\nprice_per_channel = 2\n")
    budget = "[budget]\ntotal = 150\nblock_channels = 4\nblock_price = 30\n"
    result = design(brief_of(SPHERE, TWO_REGIONS, priced, BAND, QUICK, budget))
    for layout in result.layouts:
        count = len(layout.sensors)
        assert layout.cost == 12 * count + 30 * -(-count // 4)
        assert layout.cost <= 150
    # 7 cost 84 + 60; an eighth would still fit the blocks, but not the money
    assert max(len(layout.sensors) for layout in result.layouts) == 7
    assert result.layouts[0].bound >= result.layouts[0].value


@pytest.mark.parametrize("total", [0.5, 1.5])
def test_a_budget_that_buys_nothing_useful_is_one_sentence(total):
    """Nothing at all, or one electrode, which against an unknown reference tells nothing."""
    with pytest.raises(InfeasibleError, match=r"budget\.total: must pay for sensors that tell something"):
        design(brief_of(SPHERE, TWO_REGIONS, cups(4, 'family = "10-20"'), BAND, QUICK, f"[budget]\ntotal = {total}\n"))


def test_left_right_pairs_and_the_ground():
    places = '[places]\nleft_right_pairs = true\nground = "AFz"\n'
    result = design(brief_of(SPHERE, TWO_REGIONS, cups(7, 'family = "10-10"'), BAND, QUICK, places))
    for layout in result.layouts:
        measured = [sensor for sensor in layout.sensors if sensor.role != "ground"]
        assert len(measured) == 7
        xyz = np.array([sensor.position for sensor in measured])
        mirrored = xyz * [-1, 1, 1]
        nearest = np.linalg.norm(xyz[:, None] - mirrored[None], axis=2).min(axis=0)
        assert nearest.max() < 5e-3
        (ground,) = (sensor for sensor in layout.sensors if sensor.role == "ground")
        assert ground.site == "AFz"
        assert "AFz" not in {sensor.site for sensor in measured}


def test_extending_and_trimming_an_existing_layout():
    names = ["Fz", "C3", "C4", "Pz", "Oz", "T7"]
    existing = f"[existing]\nsites = {names}\nuse = "
    extended = design(brief_of(*FEW[:2], cups(8, 'family = "10-10"'), *FEW[3:], existing + '"extend"\n'))
    trimmed = design(brief_of(*FEW[:2], cups(4, 'family = "10-10"'), *FEW[3:], existing + '"trim"\n'))
    for layout in extended.layouts:
        assert set(names) < {sensor.site for sensor in layout.sensors}
        assert len(layout.sensors) == 8
    for layout in trimmed.layouts:
        assert {sensor.site for sensor in layout.sensors} < set(names)
        assert len(layout.sensors) == 4
    assert trimmed.layouts[0].value < extended.layouts[0].value


def test_rules_that_clash_are_named():
    zone = '[[places.zones]]\nname = "front"\naround = ["Fpz"]\nradius_mm = 60\nat_least = 3\n'
    spaced = cups(5, 'family = "10-20"', "spacing_mm = 60\n")
    lay_out_study(brief_of(SPHERE, TWO_REGIONS, spaced, BAND))
    with pytest.raises(InfeasibleError, match=r"cannot hold together: .*places.zones 'front'") as refused:
        lay_out_study(brief_of(SPHERE, TWO_REGIONS, spaced, BAND, zone))
    assert "spacing_mm" in str(refused.value)


def test_the_audit_holds_the_tree_behind_the_bound():
    result = design(brief_of(*FIELD))
    tree = {name.removeprefix("proof_0_"): array for name, array in result.audit.items() if name.startswith("proof_0_")}
    assert tree["parent"][0] == -1
    assert (tree["parent"][1:] < np.arange(1, len(tree["parent"]))).all()
    leaves = ~np.isin(np.arange(len(tree["parent"])), tree["parent"])
    best = result.layouts[0]
    assert best.bound == pytest.approx(float(tree["bound"]), rel=1e-12)
    assert tree["limit"][leaves].max() <= best.bound + 1e-9 or best.proven
    assert tree["limit"][0] >= best.bound - 1e-9
    held = tree["chosen"][tree["chosen"] >= 0]
    assert held.size == 0 or held.max() < len(result.candidates)


@pytest.mark.slow
def test_free_axes_beat_a_list_and_stay_under_their_bound():
    listed = design(brief_of(SPHERE, TWO_REGIONS, coils(3, "grid_mm = 50", 'axes = "any_of_three"\n'), BAND, QUICK))
    brief = brief_of(SPHERE, TWO_REGIONS, coils(3, "grid_mm = 50", 'axes = "free"\n'), BAND, QUICK)
    free = design(brief)
    assert free.layouts[0].value >= listed.layouts[0].value - 1e-9
    assert free.layouts[0].bound >= free.layouts[0].value
    _, (problem,) = problems_of(brief)
    for layout in free.layouts:
        rows = [np.flatnonzero(problem.model.candidate_of_channel == one) for one in layout.chosen]
        axes = {sensor.candidate: sensor.axes[0] for sensor in layout.sensors}
        turn = [problem.scenario.channels.axes[row] @ axes[one] for one, row in zip(layout.chosen, rows, strict=True)]
        target = np.array([t @ problem.model.target[row] for t, row in zip(turn, rows, strict=True)])
        nuisance = np.array([t @ problem.model.nuisance[row] for t, row in zip(turn, rows, strict=True)])
        noise = np.eye(len(rows)) + nuisance @ nuisance.T
        bits = 0.5 * (np.linalg.slogdet(noise + target @ target.T)[1] - np.linalg.slogdet(noise)[1]) / np.log(2)
        assert layout.value == pytest.approx(bits, rel=1e-6)
        assert all(np.linalg.norm(sensor.axes[0]) == pytest.approx(1, abs=1e-9) for sensor in layout.sensors)


@pytest.mark.slow
def test_polish_gains_and_is_what_the_lead_fields_say():
    search = QUICK + "polish = true\n"
    result = design(brief_of(SPHERE, TWO_REGIONS, cups(5, 'family = "10-20"'), BAND, search))
    best, polished = result.layouts[0], result.polished
    assert polished.value > best.value
    assert polished.gain_percent == pytest.approx(100 * (polished.value / best.value - 1), rel=1e-6)
    study = lay_out_study(result.brief)
    own = own_scenario(study)
    where = np.array([sensor.position for sensor in polished.sensors])
    chosen = np.array([study.candidates.names.index(sensor.name) for sensor in polished.sensors])
    positions = own.channels.positions.copy()
    positions[chosen] = where  # one channel a candidate
    there = build_problem(study, scenario=replace(own, channels=replace(own.channels, positions=positions)))
    assert polished.value == pytest.approx(information(there.model, chosen), rel=1e-6)
    assert all(sensor.slid <= 60e-3 for sensor in polished.sensors)
    radius = study.cortex.sphere.outer_radius
    np.testing.assert_allclose(np.linalg.norm(where - study.cortex.sphere.centre, axis=1), radius, rtol=1e-3)
