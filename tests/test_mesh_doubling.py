"""Twice as many sources: what the goal and the background of the template head change by.

Standard and fine sample one middle surface and one field of normals (fine: the faces' middles, with positions and
normals interpolated from the vertices), so these tests measure the error of sampling that fixed field, not what a truly
finer cortex would change. The fine mesh was picked among five ways to build it partly by this very quantity.
"""

from dataclasses import replace

import numpy as np
import pytest
from studies import BAND, TEMPLATE, brief_of, coils, cups, region

from layout.design import build_problem, lay_out_study
from layout.engine.information import information
from layout.engine.information_goal import InformationGoal
from layout.engine.search import exchange, greedy
from layout.evidence.baselines import evenly

MNI = 'frame = "mni152"\n'
SIX_REGIONS = "".join(
    region(name, centre, side, radius, MNI)
    for name, centre, side, radius in (
        ("left hand", (-38, -24, 56), "left", 12),
        ("right hand", (38, -24, 56), "right", 12),
        ("right auditory", (54, -22, 8), "right", 13),
        ("left visual", (-12, -92, 2), "left", 14),
        ("right frontal", (36, 42, 28), "right", 15),
        ("left parietal", (-32, -62, 50), "left", 12),
    )
)
STOCK = {"electrodes": cups(24), "magnetometers": coils(20, "grid_mm = 20", 'axes = "any_of_three"\n')}


@pytest.fixture(scope="module", params=STOCK)
def pair(request):
    """Study on the standard mesh, the models of both meshes, and where their background columns are."""
    brief = brief_of(TEMPLATE, SIX_REGIONS, STOCK[request.param], BAND)
    study = lay_out_study(brief)
    doubled = lay_out_study(replace(brief, head=replace(brief.head, source_mesh="fine")))
    assert 1.9 < len(doubled.head.cortex) / len(study.head.cortex) < 2.1
    np.testing.assert_allclose(study.candidates.positions, doubled.candidates.positions, atol=1e-12)  # [m]
    return study, build_problem(study), build_problem(doubled)


def change(before, after):
    return abs(after / before - 1)


def layouts(study, model):
    feasible = study.feasible
    goal = InformationGoal(model)
    chosen, _, _ = exchange(goal, feasible, greedy(goal, feasible))
    return chosen, evenly(study.candidates.sites.positions, study.candidates.site, feasible, feasible.counts)


@pytest.mark.slow
def test_doubling_the_sources_changes_the_goal_by_less_than_one_per_cent(pair):
    study, standard, fine = pair
    for chosen in layouts(study, standard.model):
        assert change(information(standard.model, chosen), information(fine.model, chosen)) < 0.01


@pytest.mark.slow
def test_doubling_the_sources_changes_the_background_by_less_than_one_per_cent(pair):
    """Its power over all channels, the density that calibrates it, the fields it implies."""
    _, standard, fine = pair
    power = [(p.model.nuisance[:, :-6] ** 2).sum() for p in (standard, fine)]  # the last six are the eyes
    assert change(*power) < 0.01
    for figure in ("density", "magnetic_off", "magnetic_on"):
        assert change(getattr(standard.calibration, figure), getattr(fine.calibration, figure)) < 0.01


@pytest.mark.slow
def test_the_background_alone_changes_the_goal_of_the_chosen_layout_by_less_than_one_per_cent(pair):
    study, standard, fine = pair
    chosen, _ = layouts(study, standard.model)
    other_background = replace(standard.model, nuisance=fine.model.nuisance)
    assert change(information(standard.model, chosen), information(other_background, chosen)) < 0.01
