"""Changes of order against a general library."""

import numpy as np
from hypothesis import given
from hypothesis import strategies as st
from scipy.stats import kendalltau

from layout.evidence.wrong_models import order_change


@given(st.permutations(range(8)), st.permutations(range(8)))
def test_reversed_pairs_give_kendalls_tau(first, second):
    found = order_change(np.array(first, float), np.array(second, float))
    assert found.pairs == 28
    np.testing.assert_allclose(found.tau, kendalltau(first, second).statistic, atol=1e-12)


def test_ties_are_left_out():
    found = order_change(np.array([1.0, 1.0 + 1e-12, 2.0]), np.array([3.0, 1.0, 2.0]))
    assert (found.pairs, found.reversed) == (2, 1)
    assert order_change(np.ones(3), np.arange(3.0)).tau is None
