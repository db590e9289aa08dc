"""Degenerate models: silent channels, doubles, everything or nothing chosen, huge scales, nuisance over target."""

import numpy as np
import pytest
from engine_instances import allowed_subsets, brute_information, contrast_information, random_model

from layout.engine import search
from layout.engine.feasible import Feasible
from layout.engine.information import Conditioned, information
from layout.engine.information_goal import InformationGoal
from layout.engine.model import LinearModel
from layout.engine.ranking import rank_layouts
from layout.errors import LayoutError


def _pick(n, k):
    return Feasible(np.zeros(n, dtype=int), np.array([k]))


def _checked(model, k, rounding=1e-9):
    """A ranking whose numbers are finite and in order; compared with every other set."""
    feasible = _pick(model.n_candidates, k)
    ranking = rank_layouts(model, feasible, ranked=2, starts=4)
    values = brute_information(model, allowed_subsets(feasible)) if k else np.zeros(1)
    assert np.isfinite([ranking.root.value, ranking.root.relaxed, *ranking.root.weights]).all()
    for one in ranking.layouts:
        assert feasible.allows(one.chosen)
        assert np.isfinite([one.value, one.bound, one.gap_percent]).all()
        assert one.value <= one.bound + rounding
    assert ranking.root.value >= values.max() - rounding
    assert ranking.layouts[0].value <= values.max() + rounding
    return ranking, values


def _with(model, **changed):
    parts = {"target": model.target, "nuisance": model.nuisance, "offset": model.offset}
    return LinearModel(**(parts | changed), candidate_of_channel=model.candidate_of_channel)


@pytest.mark.parametrize("electrodes", [(), range(8)])
def test_channels_and_columns_that_see_nothing(electrodes):
    model = random_model(np.random.default_rng(0), [1] * 8, electrodes)
    target, nuisance = model.target.copy(), model.nuisance.copy()
    target[:, 1] = nuisance[:, 0] = 0.0
    target[[0, 3]] = nuisance[[0, 5]] = 0.0
    _checked(_with(model, target=target, nuisance=nuisance), 3)


@pytest.mark.parametrize("electrodes", [(), range(8)])
def test_no_target_is_no_information(electrodes):
    model = random_model(np.random.default_rng(1), [1] * 8, electrodes)
    ranking, _ = _checked(_with(model, target=np.zeros((8, 2))), 3)
    assert ranking.root.value == pytest.approx(0.0, abs=1e-9)
    assert ranking.layouts[0].gap_percent == pytest.approx(0.0, abs=1e-9) or ranking.root.value < 1e-9


@pytest.mark.parametrize("electrodes", [(), range(8)])
def test_no_nuisance_columns(electrodes):
    model = random_model(np.random.default_rng(2), [1] * 8, electrodes)
    _checked(_with(model, nuisance=np.zeros((8, 0))), 3)


@pytest.mark.parametrize("electrodes", [(), range(8)])
def test_doubled_candidates(electrodes):
    model = random_model(np.random.default_rng(3), [1] * 8, electrodes)
    twice = np.repeat(np.arange(4), 2)
    model = _with(model, target=model.target[twice], nuisance=model.nuisance[twice], offset=model.offset[twice])
    _checked(model, 4)
    _checked(_with(model, target=100 * model.target, nuisance=100 * model.nuisance), 4)


@pytest.mark.parametrize("electrodes", [(), range(5), range(2)])
def test_everything_chosen(electrodes):
    model = random_model(np.random.default_rng(4), [1] * 5, electrodes)
    ranking, values = _checked(model, 5)
    assert len(ranking.layouts) == 1
    assert ranking.root.value == pytest.approx(values[0], rel=1e-9)


def test_nothing_chosen():
    ranking, _ = _checked(random_model(np.random.default_rng(5), [1] * 5), 0)
    assert len(ranking.layouts) == 1
    assert len(ranking.layouts[0].chosen) == 0
    assert ranking.layouts[0].value == ranking.root.value == 0.0


def test_one_electrode_chosen():
    ranking, _ = _checked(random_model(np.random.default_rng(6), [1] * 6, range(6)), 1)
    assert ranking.layouts[0].value == pytest.approx(0.0, abs=1e-12)


@pytest.mark.parametrize("electrodes", [(), range(8)])
def test_row_scales_over_twelve_orders_of_magnitude(electrodes):
    """Contact noise or sensor noise from useless to perfect: 1e-6 to 1e6 times the typical."""
    model = random_model(np.random.default_rng(7), [1] * 8, electrodes)
    factor = np.geomspace(1e-6, 1e6, 8)[np.random.default_rng(7).permutation(8)]
    scaled = {"target": model.target * factor[:, None], "nuisance": model.nuisance * factor[:, None]}
    model = _with(model, **scaled, offset=model.offset * factor)
    _checked(model, 3, rounding=1e-4)
    for chosen in ([0, 1, 2], [3, 5, 7], [2, 4, 6]):
        state = Conditioned(model, chosen)
        assert state.value == pytest.approx(contrast_information(model, chosen), abs=1e-4)
        for table in (state.additions(), state.removals(), state.swaps()):
            assert not np.isnan(table).any()
            assert (table < np.inf).all()


@pytest.mark.parametrize("electrodes", [(), range(8)])
@pytest.mark.parametrize("ratio", [1e3, 1e6])
def test_nuisance_far_stronger_than_the_target(electrodes, ratio):
    model = random_model(np.random.default_rng(8), [1] * 8, electrodes, n_nuisance=3)
    model = _with(model, nuisance=ratio * model.nuisance)
    ranking, _ = _checked(model, 5, rounding=1e-3 if ratio > 1e4 else 1e-8)
    assert ranking.layouts[0].value > 0.1  # five channels, four unknowns at most: a direction is left clean


@pytest.mark.parametrize("field", ["target", "nuisance", "offset"])
@pytest.mark.parametrize("bad", [np.nan, np.inf])
def test_numbers_that_are_none_are_refused(field, bad):
    model = random_model(np.random.default_rng(9), [1] * 4, range(4))
    broken = getattr(model, field).copy()
    broken.flat[2] = bad
    with pytest.raises(LayoutError, match=field):
        _with(model, **{field: broken})


def test_rows_that_do_not_match_are_refused():
    model = random_model(np.random.default_rng(9), [1] * 4)
    with pytest.raises(LayoutError, match="one row per channel"):
        _with(model, target=model.target[:3])
    for owner in ([0, 0, 2, 3], [1, 1, 2, 3], [0, 2, 1, 3]):
        with pytest.raises(LayoutError, match="candidate_of_channel"):
            LinearModel(model.target, model.nuisance, model.offset, np.array(owner))


def test_information_does_not_change_its_arguments():
    model = random_model(np.random.default_rng(10), [1, 3, 1, 2], [0, 2])
    copies = [model.target.copy(), model.nuisance.copy(), model.offset.copy(), model.both_gram.copy()]
    chosen = np.array([2, 0, 3])
    information(model, chosen)
    state = Conditioned(model, chosen)
    first = state.swaps()
    np.testing.assert_array_equal(state.swaps(), first)
    rank_layouts(model, _pick(4, 2), starts=2)
    for before, after in zip(copies, (model.target, model.nuisance, model.offset, model.both_gram), strict=True):
        np.testing.assert_array_equal(before, after)
    np.testing.assert_array_equal(chosen, [2, 0, 3])


@pytest.mark.parametrize("strength", [1e2, 1e4, 1e5])
def test_exchange_ends_where_rounding_promises_gains_that_do_not_come(strength):
    """Doubled candidates and signals so strong that priced and recomputed values differ by more than a real gain."""
    rows = strength * np.repeat([[1.0, -1.0, 1.0], [1.0, 0.0, 0.0], [1.0, 1.0, 1.0]], 5, axis=0)
    model = LinearModel(rows, np.zeros((15, 0)), np.zeros(15), np.arange(15))
    built = []

    class Counted(InformationGoal):
        def priced(self, chosen):
            built.append(chosen)
            assert len(built) < 100, "exchange runs in circles"
            return super().priced(chosen)

    start = np.array([0, 1, 2, 3, 5])
    found, value, _ = search.exchange(Counted(model), _pick(15, 5), start)
    assert np.isfinite(value)
    rounding = 10 * np.finfo(float).eps * strength**2 + 1e-12  # of the Gram matrix beside the unit noise
    assert value >= information(model, start) - rounding
    assert abs(value - information(model, found)) < rounding
