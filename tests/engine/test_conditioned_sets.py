"""Priced additions, losses and swaps against direct recomputation of every changed set."""

import numpy as np
import pytest
from engine_instances import contrast_information, random_model, reordered
from hypothesis import given, settings
from hypothesis import strategies as st

from layout.engine.information import Conditioned, information, pair_information
from layout.engine.model import LinearModel

WIDTHS = {"one": (1,), "two": (2,), "three": (3,), "one to three": (1, 2, 3)}
SETTINGS = settings(max_examples=80, deadline=None, derandomize=True)


def _drawn(seed, widths, share, n, k, scale):
    rng = np.random.default_rng(seed)
    electrodes = np.flatnonzero(rng.random(n) < share)
    width = rng.choice(WIDTHS[widths], n)
    if widths == "one to three":
        width[electrodes] = 1
    return random_model(rng, width, electrodes, scale=scale), rng.permutation(n)[:k]


@SETTINGS
@given(
    seed=st.integers(0, 10**6),
    widths=st.sampled_from(sorted(WIDTHS)),
    share=st.sampled_from([0.0, 0.3, 1.0]),
    n=st.integers(2, 8),
    k=st.integers(0, 5),
    scale=st.sampled_from([0.1, 1.0, 10.0]),
)
def test_priced_moves_equal_direct_recomputation(seed, widths, share, n, k, scale):
    model, chosen = _drawn(seed, widths, share, n, min(k, n - 1), scale)
    state = Conditioned(model, chosen)
    close = {"rel": 1e-8, "abs": 1e-9}
    assert state.value == pytest.approx(contrast_information(model, chosen), **close)
    additions, removals, swaps = state.additions(), state.removals(), state.swaps()
    assert additions.shape == (n,)
    assert removals.shape == (len(chosen),)
    assert swaps.shape == (len(chosen), n)
    for j in range(n):
        if j in chosen:
            assert additions[j] == -np.inf
            assert (swaps[:, j] == -np.inf).all()
            continue
        assert additions[j] == pytest.approx(contrast_information(model, [*chosen, j]), **close)
        for i in range(len(chosen)):
            swapped = [*np.delete(chosen, i), j]
            assert swaps[i, j] == pytest.approx(contrast_information(model, swapped), **close)
    for i in range(len(chosen)):
        assert removals[i] == pytest.approx(contrast_information(model, np.delete(chosen, i)), **close)


def test_a_block_equals_its_channels_taken_together():
    rng = np.random.default_rng(5)
    blocks = random_model(rng, [3, 1, 2, 3, 1], [1, 4])
    apart = LinearModel(blocks.target, blocks.nuisance, blocks.offset, np.arange(blocks.n_channels))
    channels = np.split(np.arange(10), np.cumsum([3, 1, 2, 3]))
    assert information(blocks, [0, 1]) == pytest.approx(information(apart, [0, 1, 2, 3]), rel=1e-12)
    gains = Conditioned(blocks, [0, 1]).additions()
    for j in (2, 3, 4):
        together = information(apart, np.concatenate([channels[0], channels[1], channels[j]]))
        assert gains[j] == pytest.approx(together, rel=1e-11)


def test_numbering_of_candidates_does_not_matter():
    rng = np.random.default_rng(6)
    model = random_model(rng, [1, 3, 2, 1, 1, 3, 1], [0, 3, 4, 6])
    order = rng.permutation(7)
    new_number = np.argsort(order)
    chosen = np.array([3, 0, 5])
    here, there = Conditioned(model, chosen), Conditioned(reordered(model, order), new_number[chosen])
    np.testing.assert_allclose(there.additions(), here.additions()[order], rtol=1e-10)
    np.testing.assert_allclose(there.removals(), here.removals(), rtol=1e-10)
    np.testing.assert_allclose(there.swaps(), here.swaps()[:, order], rtol=1e-10)


def test_the_order_of_the_chosen_does_not_matter():
    model = random_model(np.random.default_rng(7), [1, 3, 2, 1, 1, 3, 1], [0, 3, 4, 6])
    one, other = Conditioned(model, [3, 0, 5]), Conditioned(model, [5, 3, 0])
    np.testing.assert_allclose(other.removals(), one.removals()[[2, 0, 1]], rtol=1e-10)
    np.testing.assert_allclose(other.swaps(), one.swaps()[[2, 0, 1]], rtol=1e-10)


def test_pairs_under_an_unknown_reference_equal_direct_values():
    rng = np.random.default_rng(11)
    model = random_model(rng, [1] * 4 + [3] + [1] * 5, [0, 1, 2, 3, 6, 7, 8])
    electrodes = np.array([0, 2, 3, 6, 8])
    table = pair_information(model, electrodes)
    for i, first in enumerate(electrodes):
        for j, second in enumerate(electrodes):
            direct = contrast_information(model, [first, second]) if i != j else 0.0
            assert table[i, j] == pytest.approx(direct, rel=1e-10, abs=1e-12)
