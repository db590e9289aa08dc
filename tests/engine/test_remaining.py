"""What is left of a problem once some candidates are chosen is the same problem, smaller: checked on random subsets."""

import numpy as np
import pytest
from engine_instances import allowed_subsets, brute_information, contrast_information, random_model, rows_of

from layout.engine.feasible import Feasible
from layout.engine.information import Conditioned
from layout.engine.model import LinearModel
from layout.engine.rank_aware import RESIDUAL_BITS, compressed
from layout.engine.remaining import remaining

CASES = {
    "plain": ([1] * 9, ()),
    "offset": ([1] * 9, range(9)),
    "blocks": ([3, 1, 2, 3, 2, 1, 3, 1, 2], ()),
    "mixed": ([1, 1, 3, 1, 2, 1, 1, 3, 1], (0, 1, 3, 5, 8)),
}
CASE = pytest.mark.parametrize("case", sorted(CASES))
ELECTRODES = {case: np.isin(np.arange(9), list(electrodes)) for case, (_, electrodes) in CASES.items()}


def _splits(case, draws=40):
    """Random (model, chosen, candidates): chosen of 0..4 candidates, with electrodes among them or (some) without."""
    rng = np.random.default_rng([11, sorted(CASES).index(case)])
    widths, electrodes = CASES[case]
    for draw in range(draws):
        model = random_model(rng, widths, electrodes, n_target=4, scale=float(rng.choice([0.3, 1.0, 3.0])))
        order = rng.permutation(9)
        if draw % 3 == 0:  # magnetometers before electrodes, so that the offset stays free where it can
            order = order[np.argsort(ELECTRODES[case][order], kind="stable")]
        held = int(rng.integers(0, 5))
        chosen, left = order[:held], order[held:]
        yield rng, model, chosen, np.sort(left[: int(rng.integers(2, len(left) + 1))])


def _bits(left, chosen):
    """Bits of some of what is left, from its covariances alone: bordered determinants where the offset is free."""
    rows = rows_of(left, chosen)
    offset = left.offset[rows]
    total = 0.0
    for sign, gram in ((1, left.both_gram), (-1, left.nuisance_gram)):
        block = gram[np.ix_(rows, rows)]
        if offset.any():
            block = np.block([[block, offset[:, None]], [offset[None], np.zeros((1, 1))]])
        total += sign * np.linalg.slogdet(block)[1]
    return 0.5 * total / np.log(2)


@CASE
def test_value_and_the_rest_make_the_information_of_the_union(case):
    free = seen = 0
    for rng, model, chosen, candidates in _splits(case):
        left = remaining(model, chosen, candidates, model.target)
        assert left.value == pytest.approx(contrast_information(model, chosen) if len(chosen) else 0.0, abs=1e-9)
        free, seen = free + left.offset.any(), seen + ELECTRODES[case][chosen].any()
        for _ in range(6):
            some = rng.permutation(len(candidates))[: int(rng.integers(1, len(candidates) + 1))]
            union = contrast_information(model, np.append(chosen, candidates[some]))
            assert left.value + _bits(left, some) == pytest.approx(union, rel=1e-9, abs=1e-9)
            assert left.value + Conditioned(left, some).value == pytest.approx(union, rel=1e-9, abs=1e-9)
    assert (free > 0) == (seen > 0) == ELECTRODES[case].any()  # both kinds of offset were met


@CASE
def test_the_rest_keeps_its_channels_and_the_silent_one(case):
    for _, model, chosen, candidates in _splits(case, 20):
        left = remaining(model, chosen, candidates, model.target)
        np.testing.assert_array_equal(left.candidates, candidates)
        owner = model.candidate_of_channel[rows_of(model, candidates)]
        np.testing.assert_array_equal(candidates[left.candidate_of_channel], owner)
        seen = ELECTRODES[case][chosen].any()
        np.testing.assert_array_equal(left.offset, 0.0 if seen else model.offset[rows_of(model, candidates)])
        silent = np.eye(left.n_channels + 1)[-1]
        for gram in (left.both_gram, left.nuisance_gram):
            assert gram.shape == (left.n_channels + 1, left.n_channels + 1)
            np.testing.assert_array_equal(gram[-1], silent)
            np.testing.assert_array_equal(gram[:, -1], silent)


@CASE
def test_target_rows_are_the_difference_of_the_covariances(case):
    for _, model, chosen, candidates in _splits(case):
        left = remaining(model, chosen, candidates, model.target)
        difference = (left.both_gram - left.nuisance_gram)[:-1, :-1]
        assert left.target.shape == (left.n_channels, 4)
        np.testing.assert_allclose(left.target @ left.target.T, difference, atol=1e-9 * max(1.0, difference.max()))


def _decaying(rng, widths=(1,) * 10, electrodes=(), n_target=9):
    model = random_model(rng, list(widths), electrodes, n_target=n_target)
    rotation = np.linalg.qr(rng.standard_normal((n_target, n_target)))[0]
    target = model.target * 10.0 ** -np.arange(n_target) @ rotation
    return LinearModel(target, model.nuisance, model.offset, model.candidate_of_channel)


def test_compressed_rows_have_the_products_less_the_residual_they_state():
    rng = np.random.default_rng(3)
    for channels in range(1, 6):
        target = _decaying(rng).target
        rows, residual = compressed(target, channels)
        assert 0 < residual <= RESIDUAL_BITS
        assert rows.shape[1] < target.shape[1]
        missing = target @ target.T - rows @ rows.T
        assert np.linalg.eigvalsh(missing).min() >= -1e-12  # rounding of products of about 10
        stated = np.sort(np.diag(missing))[-channels:].sum() / (2 * np.log(2))
        assert residual == pytest.approx(stated, rel=1e-6)
        fewer = np.diag(target @ target.T - rows[:, :-1] @ rows[:, :-1].T)
        assert np.sort(fewer)[-channels:].sum() / (2 * np.log(2)) > RESIDUAL_BITS  # no column could be spared


@pytest.mark.parametrize("shape", [(6, 4), (4, 6), (5, 5)])
def test_a_target_with_nothing_to_spare_is_kept_whole(shape):
    target = np.random.default_rng(4).standard_normal(shape)
    rows, residual = compressed(target, 3)
    assert residual == 0.0
    assert rows.shape == (shape[0], min(shape))
    np.testing.assert_allclose(rows @ rows.T, target @ target.T, atol=1e-12)


def test_no_target_compresses_to_nothing():
    rows, residual = compressed(np.zeros((5, 3)), 2)
    assert rows.shape == (5, 0)
    assert residual == 0.0


@pytest.mark.parametrize("electrodes", [(), range(10)], ids=["plain", "offset"])
def test_compression_takes_no_set_further_than_the_residual(electrodes):
    """Also for what is left of a set: information of the chosen, of the compressed rest, and the residual."""
    rng = np.random.default_rng(5)
    for k in (2, 3, 4):
        model = _decaying(rng, electrodes=electrodes)
        rows, residual = compressed(model.target, k)
        less = LinearModel(rows, model.nuisance, model.offset, model.candidate_of_channel)
        sets = allowed_subsets(Feasible(np.zeros(10, dtype=int), np.array([k])))
        whole, reduced = brute_information(model, sets), brute_information(less, sets)
        assert (reduced <= whole + 1e-12).all()
        assert (whole <= reduced + residual + 1e-12).all()
        lost = (whole - reduced).max()
        assert lost > 0.01 * residual  # the residual is no empty promise
        for one, value in zip(sets[:60], whole, strict=False):
            left = remaining(model, one[:1], one[1:], rows)
            noise = left.nuisance_gram[:-1, :-1]
            rest = np.linalg.slogdet(noise + left.target @ left.target.T)[1] - np.linalg.slogdet(noise)[1]
            assert value <= left.value + 0.5 * rest / np.log(2) + residual + 1e-10
