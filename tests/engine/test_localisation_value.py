"""The linearised error of a set, its tables of changes, and its pairs, against one bordered precision matrix."""

from dataclasses import replace

import numpy as np
import pytest
from localisation_instances import CASES, bordered_errors, bordered_score, random_localisation

from layout.engine.localisation import LocalisationGoal
from layout.errors import LayoutError

CASE = pytest.mark.parametrize("case", sorted(CASES))
KIND = pytest.mark.parametrize("kind", ["rms", "worst"])
CLOSE = {"rtol": 1e-9, "atol": 0}


@CASE
@KIND
def test_score_of_every_set(case, kind):
    goal = LocalisationGoal(random_localisation(case), kind)
    for bits in range(2**8):
        chosen = np.flatnonzero([bits >> j & 1 for j in range(8)])
        assert goal.score(chosen) == pytest.approx(bordered_score(goal.model, chosen, kind), rel=1e-10, abs=0)


def test_a_hopeless_layout_has_the_prior_error():
    goal = LocalisationGoal(random_localisation("offset"))
    prior = np.sqrt((goal.model.spread**2).sum(axis=1))
    np.testing.assert_allclose(goal.errors(np.array([], dtype=int)), prior, rtol=1e-14)
    np.testing.assert_allclose(goal.errors(np.array([3])), prior, rtol=1e-14)  # a single electrode: no reference


@CASE
@KIND
@pytest.mark.parametrize("scale", [0.3, 30.0])
@pytest.mark.parametrize("chosen", [[], [2], [0, 2], [6, 1, 3], [7, 6, 4], [5, 0, 3, 7, 2, 6]])
def test_tables_equal_direct_scores(case, kind, scale, chosen):
    goal = LocalisationGoal(random_localisation(case, scale=scale), kind)
    state = goal.priced(np.array(chosen, dtype=int))

    def direct(candidates):
        return -np.inf if len(set(candidates)) < len(candidates) else bordered_score(goal.model, candidates, kind)

    np.testing.assert_allclose(state.value, direct(chosen), **CLOSE)
    np.testing.assert_allclose(state.additions(), [direct([*chosen, j]) for j in range(8)], **CLOSE)
    rest = [[c for c in chosen if c != dropped] for dropped in chosen]
    np.testing.assert_allclose(state.removals(), [direct(r) for r in rest], **CLOSE)
    swaps = [[direct([*r, j]) if j not in chosen else -np.inf for j in range(8)] for r in rest]
    np.testing.assert_allclose(state.swaps(), np.reshape(swaps, (len(chosen), 8)), **CLOSE)


@KIND
def test_pairs_of_electrodes(kind):
    goal = LocalisationGoal(random_localisation("offset"), kind)
    candidates = np.array([6, 0, 3, 4])
    table = goal.pairs(candidates)
    for a in range(4):
        for b in range(4):
            if a != b:
                direct = bordered_score(goal.model, candidates[[a, b]], kind)
                assert table[a, b] == pytest.approx(direct, rel=1e-10, abs=0)


@CASE
def test_a_large_finite_offset_variance_tends_to_the_flat_one(case):
    model = random_localisation(case)
    chosen = np.array([0, 2, 3, 5])
    exact = LocalisationGoal(model).errors(chosen)
    wide = [
        replace(model, nuisance=np.column_stack([model.nuisance, s * model.offset]), offset=0 * model.offset)
        for s in (1e2, 1e3)
    ]
    first, second = (np.abs(LocalisationGoal(one).errors(chosen) - exact).max() for one in wide)
    if CASES[case][1]:
        assert 0 < second < 0.02 * first < 1e-4
    else:
        assert first == second == 0


@CASE
def test_regions(case):
    model = random_localisation(case)
    goal, chosen = LocalisationGoal(model), np.array([0, 2, 3])
    errors = bordered_errors(model, chosen)
    for label, (rms, worst) in goal.per_region(chosen).items():
        inside = model.region == label
        assert rms == pytest.approx(np.sqrt(np.average(errors[inside] ** 2, weights=model.share[inside])), rel=1e-12)
        assert worst == pytest.approx(errors[inside].max(), rel=1e-12)
        alone = model.of_region(label)
        assert -LocalisationGoal(alone).score(chosen) == pytest.approx(rms, rel=1e-12)
        assert -LocalisationGoal(alone, "worst").score(chosen) == pytest.approx(worst, rel=1e-12)


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"spread": np.zeros((4, 3))}, "spread must be positive"),
        ({"share": np.full(4, 0.3)}, "sums to 1.2"),
        ({"derivatives": np.zeros((8, 4, 2))}, "3 or more"),
        ({"nuisance": np.full((8, 1), np.nan)}, "nuisance must be finite"),
        ({"region": np.zeros(3, dtype=int)}, "each of the 4 hypotheses"),
        ({"candidate_of_channel": np.arange(8)[::-1]}, "sorted"),
    ],
)
def test_what_does_not_fit_is_said(change, words):
    with pytest.raises(LayoutError, match=words):
        replace(random_localisation("plain"), **change)


def test_unknown_kind_and_region():
    with pytest.raises(LayoutError, match="kind must be one of rms, worst, not mean"):
        LocalisationGoal(random_localisation("plain"), "mean")
    with pytest.raises(LayoutError, match="7 does not"):
        random_localisation("plain").of_region(7)
