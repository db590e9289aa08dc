"""What a design hands over beside its layouts: against the commands of the same name, and against closed forms."""

from functools import cache

import numpy as np
import pytest
from studies import BAND, SPHERE, TWO_REGIONS, brief_of, coils, cups

from layout.design import design
from layout.design.evidence import curve_amounts
from layout.design.placement import placement
from layout.design.problem import build_problem
from layout.design.study import lay_out_study

QUICK = "[search]\nstarts = 3\nproof_parts = 10\nranked = 2\n"
TABLES = {
    "cups": (SPHERE, TWO_REGIONS, cups(5, 'family = "10-20"'), BAND, QUICK),
    "coils": (SPHERE, TWO_REGIONS, coils(4, "grid_mm = 40", 'axes = "two_axis"\n'), BAND, QUICK),
}


@cache
def found(kind):
    return design(brief_of(*TABLES[kind]), evidence=True)


@pytest.mark.parametrize("kind", ["cups", "coils"])
def test_layouts_examined_together_have_the_room_that_each_has_alone(kind):
    result = found(kind)
    assert len(result.layouts) == len(result.evidence.placements) == 2
    for layout, together in zip(result.layouts, result.evidence.placements, strict=True):
        alone = placement(brief_of(*TABLES[kind]), rank=layout.rank, draws=2)
        assert together.value == pytest.approx(layout.value, rel=1e-9)
        by_name = {one.name: one for one in alone.sensors}
        for row, one in zip(layout.sensors, together.sensors, strict=True):
            other = by_name[row.name]
            assert (one.number, one.name) == (row.number, row.name)
            assert one.lost == pytest.approx(other.lost, rel=1e-6) == pytest.approx(row.worth, rel=1e-6)
            np.testing.assert_allclose(one.slide.worst, other.slide.worst, rtol=1e-6)
            assert [name for name, _ in one.substitutes] == [name for name, _ in other.substitutes]
            assert (one.tilt is None) == (kind == "cups")


@pytest.mark.parametrize("kind", ["cups", "coils"])
def test_sensitivity_is_the_detector_of_differences_between_channels(kind):
    """Differences to the first electrode lose nothing that an unknown reference leaves: a matrix inverse is enough."""
    result = found(kind)
    study = lay_out_study(result.brief)
    problem = build_problem(study)
    chosen = [row.candidate for row in result.layouts[1].sensors]
    rows = np.concatenate([np.flatnonzero(study.candidates.candidate_of_channel == one) for one in chosen])
    sources = np.arange(0, len(study.head.cortex), 97)
    gain = problem.scenario.channels.lead_field(study.cortex, sources, free=True).gain[rows]  # a sphere has no normals
    gain = gain.reshape(len(rows), -1)
    sd = problem.sensor_sd[rows]
    nuisance = problem.model.nuisance[rows] * sd[:, None]
    noise = nuisance @ nuisance.T + np.diag(sd**2)
    if kind == "cups":
        apart = np.hstack([-np.ones((len(rows) - 1, 1)), np.eye(len(rows) - 1)])
        gain, noise = apart @ gain, apart @ noise @ apart.T
    inverse = np.linalg.inv(noise / noise.max()) / noise.max()
    power = np.einsum("nm,nk,km->m", gain, inverse, gain).reshape(len(sources), 3)
    expected = 10e-9 * np.sqrt(power.mean(axis=1))
    assert expected.max() > 0.01
    np.testing.assert_allclose(result.evidence.sensitivity[1][sources], expected, rtol=1e-6)


def test_the_parts_of_the_noise_make_its_whole():
    """Background at the 10-20 sites as the brief sets it; contact noise, which it names, alone in its own part."""
    noise = found("cups").evidence.noise[0]
    assert set(noise.parts) == {"sensor", "background", "eyes"}
    np.testing.assert_allclose(noise.parts["sensor"], 1e-6, rtol=1e-9)
    assert noise.units == ("V",) * 5
    np.testing.assert_allclose(np.diag(noise.correlation), 1.0, rtol=1e-12)
    assert np.abs(noise.correlation - np.eye(5)).max() > 0.3  # electrodes share the brain's activity
    [coil] = set(found("coils").evidence.noise[0].units)
    assert coil == "T"
    four = (*TABLES["cups"][:3], BAND + "averages = 4\n", QUICK)
    quieter = design(brief_of(*four), evidence=True).evidence
    for name in [row.name for row in found("cups").layouts[0].sensors]:
        if name in quieter.noise[0].names:
            here, there = quieter.noise[0].names.index(name), noise.names.index(name)
            for part, values in noise.parts.items():
                assert quieter.noise[0].parts[part][here] == pytest.approx(values[there] / 2, rel=1e-9, abs=0)


def test_the_curve_has_the_design_itself_as_its_point():
    result = found("cups")
    curve = result.evidence.curve
    assert [one.sensors for one in curve.points] == [2, 4, 5, 8, 10]
    own = curve.points[2]
    assert own.value == pytest.approx(result.layouts[0].value, rel=1e-9)
    assert own.bound == pytest.approx(result.layouts[0].bound, rel=1e-9)
    values = [one.value for one in curve.points]
    assert values == sorted(values)


def test_amounts_that_the_rules_do_not_allow_are_left_out():
    study = lay_out_study(brief_of(SPHERE, TWO_REGIONS, cups(12, 'family = "10-20"'), BAND, QUICK))
    assert len(study.candidates) < 24
    assert curve_amounts(study).values == (3.0, 6.0, 9.0, 12.0, 18.0)
