"""The pipeline from a brief to a design: what it reports agrees with itself and with computations apart from it."""

from dataclasses import replace
from itertools import combinations

import numpy as np
import pytest
from scipy.optimize import linprog
from studies import BAND, FRONTAL, HANDS, SPHERE, TEMPLATE, TWO_REGIONS, brief_of, coils, cups, problem_of, study_of

from layout.anatomy.head import Region
from layout.design import build_problem, design
from layout.design.problem import region_columns
from layout.engine.information import information
from layout.physics.channels import candidate_channels
from layout.physics.nearest_point import nearest_on_surface
from layout.physics.sphere_model import map_sources

SEARCH = "[search]\nstarts = 3\nranked = 3\n"
EEG = (SPHERE, TWO_REGIONS, cups(6, more="price = 1.5\n"), BAND, SEARCH)
BOTH = (SPHERE, TWO_REGIONS, cups(4), coils(3, "grid_mm = 35", 'axes = "two_axis"\nprice = 20\n'), BAND, SEARCH)
HELMET = (TEMPLATE, HANDS, coils(20, "grid_mm = 14", 'axes = "any_of_three"\n'), BAND, SEARCH)


def bits(audit, chosen, wanted=slice(None)):
    """Information from the audit's arrays alone, by the covariances of ordinary and, for electrodes, differenced data.

    The unknown offset is removed by differences to the first electrode, not by the engine's formula.
    """
    rows = np.flatnonzero(np.isin(audit["candidate_of_channel"], chosen))
    offset = audit["offset"][rows]
    contrast = np.eye(len(rows))
    seen = np.flatnonzero(offset)
    if len(seen):
        contrast[seen[1:], seen[0]] = -offset[seen[1:]] / offset[seen[0]]
        contrast = np.delete(contrast, seen[0], axis=0)
    target, nuisance = contrast @ audit["target"][rows], contrast @ audit["nuisance"][rows]
    others = np.delete(target, np.arange(target.shape[1])[wanted], axis=1)
    noise = contrast @ contrast.T + nuisance @ nuisance.T + others @ others.T
    wanted_part = target[:, wanted] @ target[:, wanted].T
    return 0.5 * (np.linalg.slogdet(noise + wanted_part)[1] - np.linalg.slogdet(noise)[1]) / np.log(2)


def housings_sharing_space(result, layout):
    """Pairs of housings that hold a common ball, by a linear programme for each pair; None without magnetometers."""
    stock = {entry.name: entry for entry in result.brief.stock}
    boxes = []
    for sensor in layout.sensors:
        if sensor.kind_type == "magnetometer":
            pose = result.candidates.housing_pose[sensor.candidate]
            width, depth, length = stock[sensor.kind].housing
            sides = np.vstack([pose[:3, :3].T, -pose[:3, :3].T])  # outward normals of the six faces
            reach = np.array([width / 2, depth / 2, length, width / 2, depth / 2, 0.0])
            boxes.append((sides, sides @ pose[:3, 3] + reach))
    if not boxes:
        return None
    count = 0
    for (sides, reach), (others, limits) in combinations(boxes, 2):
        rows = np.column_stack([np.vstack([sides, others]), np.ones(12)])
        ball = linprog([0, 0, 0, -1], rows, np.concatenate([reach, limits]), bounds=[(None, None)] * 4)
        count += ball.x[3] > 1e-7  # its radius [m]
    return count


def check_design(tables):
    """Everything a result says about its layouts, recomputed from the audit's arrays."""
    result, study, problem = design(brief_of(*tables)), study_of(*tables), problem_of(*tables)
    audit = result.audit
    np.testing.assert_allclose(audit["target"], problem.model.target, rtol=1e-9)
    np.testing.assert_array_equal(audit["values"], [layout.value for layout in result.layouts])
    assert len(result.layouts) == 3
    for row, layout in enumerate(result.layouts):
        chosen = np.array(layout.chosen)
        np.testing.assert_array_equal(np.sort(audit["chosen"][row]), np.sort(chosen))
        assert study.feasible.allows(chosen)
        assert layout.value == pytest.approx(information(problem.model, chosen), rel=1e-9)
        assert layout.value == pytest.approx(bits(audit, chosen), rel=1e-8)
        assert layout.value <= layout.bound <= result.root_bound + 1e-9
        assert layout.gap_percent == pytest.approx(100 * (layout.bound - layout.value) / layout.bound)
        assert {sensor.candidate for sensor in layout.sensors} == set(layout.chosen)
        assert [sensor.number for sensor in layout.sensors] == list(range(1, len(chosen) + 1))
        for sensor in layout.sensors:
            without = chosen[chosen != sensor.candidate]
            assert sensor.worth == pytest.approx(layout.value - bits(audit, without), abs=1e-8)
        for name, columns in problem.target_columns.items():
            assert layout.per_region[name].bits == pytest.approx(bits(audit, chosen, columns), rel=1e-7)
        assert max(figure.bits for figure in layout.per_region.values()) <= layout.value + 1e-12
        prices = {entry.name: entry.price for entry in result.brief.stock}
        assert layout.cost == pytest.approx(sum(prices[sensor.kind] for sensor in layout.sensors))
        for earlier in result.layouts[:row]:
            same = len(set(study.candidates.site[chosen]) & set(study.candidates.site[list(earlier.chosen)]))
            assert len(chosen) - same >= result.search_effort["differ by"]
        assert layout.housings_meet == housings_sharing_space(result, layout)
    values = [layout.value for layout in result.layouts]
    assert values == sorted(values, reverse=True)
    for baseline in result.baselines:
        assert baseline.percent_of_best == pytest.approx(100 * baseline.value / values[0])
        if baseline.chosen and study.feasible.allows(np.array(baseline.chosen)):
            assert baseline.value <= values[0] + 1e-9
    assert result.bound == result.layouts[0].bound
    return result


def test_electrodes_on_a_sphere():
    result = check_design(EEG)
    assert result.layouts[0].cost == 9
    assert [sensor.role for sensor in result.layouts[0].sensors].count("reference") == 1
    assert result.layouts[0].equals_even_spread_of >= 6
    assert result.baselines[0].note == ""
    assert list(result.notes) == ["Sites", "Head and model", "Strengths and noise", "Goal", "Ranking"]
    assert not any("tangent" in note for note in result.notes["Sites"])
    assert "at least 1 sensor;" in result.notes["Ranking"][0]


@pytest.mark.slow
def test_both_kinds_on_a_sphere():
    result = check_design(BOTH)
    assert result.layouts[0].cost == 64
    assert [sensor.kind for sensor in result.layouts[0].sensors] == ["cup"] * 4 + ["coil"] * 3
    assert "every magnetometer's axis normal+tangent1" in result.baselines[0].note


@pytest.mark.slow
def test_magnetometers_on_the_template():
    result = check_design(HELMET)
    assert len(result.candidates) >= 900
    assert result.layouts[0].housings_meet > 0
    assert "background field 20 mm off the scalp, rms" in result.figures_of_noise


@pytest.mark.slow
def test_the_same_brief_gives_the_same_numbers():
    first, second = (design(brief_of(*BOTH)) for _ in range(2))
    for name, array in first.audit.items():
        np.testing.assert_array_equal(array, second.audit[name], err_msg=name)
    assert [one.value for one in first.baselines] == [one.value for one in second.baselines]


@pytest.mark.slow
def test_any_member_may_be_called_the_reference():
    """Each of the kept set named in turn: the same value, which is that of data measured against that very contact."""
    names = ("Fz", "C3", "CP4", "Oz", "T8")
    places = f"[places]\nkeep = {list(names)}\n".replace("'", '"')
    values = []
    for name in ("any", *names):
        stock = cups(len(names), more=f'reference = "{name}"\n')
        result = design(brief_of(SPHERE, TWO_REGIONS, stock, places, BAND, "[search]\nranked = 1\n"))
        (layout,) = result.layouts
        assert {sensor.site for sensor in layout.sensors} == set(names)
        if name != "any":
            assert [sensor.site for sensor in layout.sensors if sensor.role == "reference"] == [name]
        values.append(layout.value)
    np.testing.assert_allclose(values, values[0], atol=1e-8, rtol=0)
    chosen, audit = np.array(layout.chosen), result.audit
    for first in range(len(chosen)):
        order = np.roll(np.arange(len(chosen)), -first)
        turned = {key: audit[key][chosen][order] for key in ("target", "nuisance", "offset")}
        turned["candidate_of_channel"] = np.arange(len(chosen))
        assert bits(turned, np.arange(len(chosen))) == pytest.approx(values[0], abs=1e-8)


def region_rows(study, problem, name):
    """A region's columns in volts or tesla, and the plain lead field of its sources."""
    region = next(one for one in study.regions if one.name == name)
    channels = candidate_channels(study.candidates)
    gain = channels.lead_field(study.cortex, region.members, free=region.free_orientation).gain
    scale = 1 / problem.model.offset  # electrodes: the offset's row is 1 over the contact noise
    return problem.model.target[:, problem.target_columns[name]] * scale[:, None], gain, region


def test_incoherent_strengths_share_the_moment_by_area():
    """The covariance of the region, summed source by source."""
    study, problem = study_of(*EEG), problem_of(*EEG)
    columns, gain, region = region_rows(study, problem, "left")
    areas = region.areas
    expected = np.zeros((len(gain), len(gain)))
    for j, area in enumerate(areas):
        expected += (10e-9) ** 2 * area / areas.sum() * gain[:, j] @ gain[:, j].T / 3
    np.testing.assert_allclose(columns @ columns.T, expected, rtol=1e-9, atol=1e-9 * np.abs(expected).max())


@pytest.mark.parametrize("coherent", [False, True])
def test_net_moment_of_a_region_has_the_rms_asked_for(coherent):
    """Simulated moments, summed without regard to direction; coherent ones all share one factor."""
    rng = np.random.default_rng(11)
    areas = rng.uniform(1e-6, 9e-6, 70)
    region = Region("any", np.arange(70), areas, 25e-9, coherent, False, np.zeros(3))
    sees_the_sum = region_columns(region, np.ones((1, 70)), areas)
    net = (sees_the_sum @ rng.standard_normal((sees_the_sum.shape[1], 400_000)))[0]
    assert np.sqrt((net**2).mean()) == pytest.approx(25e-9, rel=0.01, abs=0)
    assert np.sqrt((sees_the_sum**2).sum()) == pytest.approx(25e-9, rel=1e-12, abs=0)


@pytest.mark.slow
def test_coherent_column_on_the_template():
    tables = (TEMPLATE, HANDS + "coherent = true\n", cups(4, 'family = "10-20"'), BAND)
    study, problem = study_of(*tables), problem_of(*tables)
    columns, gain, region = region_rows(study, problem, "right hand")
    assert (region.coherent, columns.shape[1]) == (True, 1)
    areas = region.areas
    expected = sum(gain[:, j] * areas[j] for j in range(len(areas))) / sum(areas) * 10e-9
    np.testing.assert_allclose(columns[:, 0], expected, rtol=1e-9, atol=1e-9 * np.abs(expected).max())


@pytest.mark.slow
def test_displacements_are_those_of_the_whole_cortex():
    tables = (TEMPLATE, HANDS, cups(4, 'family = "10-20"'), BAND)
    study, problem = study_of(*tables), problem_of(*tables)
    before = study.head.cortex.positions
    after = map_sources(study.cortex.sphere, study.head, before, None).positions
    moved = np.linalg.norm(after - before, axis=1)
    assert problem.displacements.sources_max == pytest.approx(moved.max(), abs=0)
    assert problem.displacements.sources_rms == pytest.approx(np.sqrt((moved**2).mean()), abs=0)
    depth = nearest_on_surface(study.head.inner_skull, before).inside_depth
    assert (
        problem.displacements.sources_clipped
        == (depth < study.cortex.sphere.inner_skull_radius - study.cortex.sphere.brain_radius + 0.5e-3).sum()
    )


@pytest.mark.slow
def test_eyes_take_the_win_from_the_forehead():
    """Frontal sources: without eye activity forehead sites win more, with it Fp1 and Fp2 tell less than before."""
    tables = (TEMPLATE, FRONTAL, cups(8), BAND)
    study, with_eyes = study_of(*tables), problem_of(*tables)
    noise = replace(study.brief.noise, eyes_rms=0.0)
    without = build_problem(replace(study, brief=replace(study.brief, noise=noise)))
    names = np.array(study.candidates.sites.names)[study.candidates.site]

    def chosen(*sites):
        return np.array([np.flatnonzero(names == site)[0] for site in sites])

    forehead = chosen("Fp1", "Fpz", "Fp2", "AF7", "AF8", "Fz", "F7", "F8")
    further_back = chosen("F1", "F2", "F5", "F6", "FC3", "FC4", "Fz", "Cz")
    gain_of_forehead = [
        information(problem.model, forehead) / information(problem.model, further_back)
        for problem in (without, with_eyes)
    ]
    assert gain_of_forehead[0] > 1.2 * gain_of_forehead[1]
    base = chosen("Fz", "F7", "F8", "Cz")
    for site in ("Fp1", "Fp2"):
        added = np.append(base, chosen(site))
        told = [information(p.model, added) - information(p.model, base) for p in (without, with_eyes)]
        assert told[1] < told[0] / 2, (site, told)
