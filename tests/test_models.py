"""The physical models of a head, head sizes and lead fields from files, through the whole pipeline."""

from dataclasses import replace

import numpy as np
import pytest
from studies import BAND, HANDS, brief_of, coils, cups, region

from layout.anatomy.head_size import head_size
from layout.design import build_problem, design, lay_out_study
from layout.design.lead_field import export_lead_field
from layout.design.scenarios import scenarios
from layout.engine.information import information
from layout.errors import FileError

COARSE = '[head]\nkind = "template"\nsource_mesh = "coarse"\nnodes = 400\n'
QUICK = "[search]\nstarts = 2\nranked = 1\nproof_parts = 0\n"
BOTH = (HANDS, cups(6, 'family = "10-20"'), coils(4, "grid_mm = 45"), BAND, QUICK)


@pytest.fixture(scope="module")
def brief():
    return brief_of(COARSE, *BOTH)


@pytest.mark.slow
def test_boundary_elements_are_the_template_s_default_and_say_what_they_are(brief):
    assert brief.head.model == "boundary_elements"
    result = design(brief)
    (note,) = (one for one in result.notes["Head and model"] if "Boundary elements of" in one)
    assert "nearer to the inner skull than half an edge" in note
    assert result.layouts[0].bound >= result.layouts[0].value > 0


@pytest.mark.slow
def test_boundary_elements_and_spheres_tell_much_the_same(brief):
    """A band, not a truth: the quick model moves sources by up to 15 mm, so single channels differ by far more."""
    models = {
        model: build_problem(lay_out_study(replace(brief, head=replace(brief.head, model=model)))).model
        for model in ("boundary_elements", "spheres")
    }
    rng = np.random.default_rng(2)
    study = lay_out_study(brief)
    kinds = study.candidates.kind
    for _ in range(5):
        chosen = np.concatenate([rng.choice(np.flatnonzero(kinds == kind), 5, replace=False) for kind in (0, 1)])
        by, ball = (information(models[model], chosen) for model in ("boundary_elements", "spheres"))
        assert 0.5 < by / ball < 2.0
    gains = [np.abs(model.target).sum(axis=1) for model in models.values()]
    assert np.corrcoef(*gains)[0, 1] > 0.8


@pytest.mark.slow
def test_a_lead_field_written_and_named_in_the_brief_changes_nothing(brief, tmp_path):
    path = tmp_path / "own.npz"
    channels, sources = export_lead_field(brief, path)
    own = build_problem(lay_out_study(brief))
    given = build_problem(lay_out_study(replace(brief, head=replace(brief.head, lead_field_file=path))))
    assert (channels, sources) == (own.model.n_channels, len(lay_out_study(brief).head.cortex))
    scale = np.abs(own.model.target).max()
    np.testing.assert_allclose(given.model.target, own.model.target, atol=1e-9 * scale, rtol=0)


def test_a_lead_field_of_another_kind_of_file_is_refused_before_any_work(brief, tmp_path):
    with pytest.raises(FileError, match="must end in"):
        export_lead_field(brief, tmp_path / "own.txt")
    (tmp_path / "own.npz").mkdir()
    with pytest.raises(FileError, match="folder"):
        export_lead_field(brief, tmp_path / "own.npz")


@pytest.mark.slow
def test_heads_of_the_survey_carry_the_same_candidates():
    heads = '[scenarios]\nheads = ["female 5th percentile", "male 95th percentile"]\n'
    brief = brief_of(COARSE.replace("nodes = 400\n", 'model = "spheres"\n'), *BOTH, heads)
    study = lay_out_study(brief)
    own, small, large = scenarios(study)
    sizes = [head_size(one.study.head)[:2] for one in (small, large)]
    np.testing.assert_allclose(sizes, [(0.178, 0.140), (0.211, 0.163)], atol=1e-3)  # Gordon et al. 2014
    for one in (small, large):
        there = one.study.candidates
        assert there.names == study.candidates.names
        np.testing.assert_array_equal(there.candidate_of_channel, study.candidates.candidate_of_channel)
        fractions = there.sites.arc_fractions[there.site]
        np.testing.assert_allclose(fractions, study.candidates.sites.arc_fractions[study.candidates.site], atol=2e-3)
    spans = [np.ptp(one.channels.positions, axis=0).max() for one in (small, own, large)]
    assert spans[0] < spans[1] < spans[2]
    values = [information(build_problem(study, scenario=one).model, np.arange(0, 30, 3)) for one in (own, small, large)]
    assert len({round(value, 3) for value in values}) == 3


def test_regions_along_the_cortex_go_through_the_pipeline():
    along = region("hand", (-38, -24, 56), "left", 12, 'frame = "mni152"\nalong_cortex = true\n')
    straight = along.replace("along_cortex = true\n", "")
    geodesic, ball = (
        lay_out_study(brief_of(COARSE, one, cups(4, 'family = "10-20"'), BAND)).regions[0] for one in (along, straight)
    )
    assert 0 < geodesic.areas.sum() < ball.areas.sum()  # along the folds is farther than through the air
