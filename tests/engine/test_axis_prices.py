"""The best axis against a matrix or a ratio of two, and its price, compared with dense grids and general solvers."""

import numpy as np
import pytest
from axis_instances import cap_directions, components_model, directions
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.linalg import eigh

from layout.engine.axis_freedom import FreeAxes, Turning
from layout.engine.axis_prices import best_frames, best_in_cap, best_ratio_frames, cap_price
from layout.errors import LayoutError


def positive(rng, n=1, rank=3):
    root = rng.standard_normal((n, 3, rank))
    return root @ root.transpose(0, 2, 1)


def forms(matrix, axes):
    return np.einsum("ai,ij,aj->a", axes, matrix, axes)


@settings(max_examples=60, deadline=None)
@given(seed=st.integers(0, 10_000), tilt=st.floats(0.05, 1.5))
def test_the_price_within_a_tilt_is_the_best_axis_of_a_dense_cap(seed, tilt):
    rng = np.random.default_rng(seed)
    matrix, normal = positive(rng), rng.standard_normal((1, 3))
    normal /= np.linalg.norm(normal)
    cosine = np.array([np.cos(tilt)])
    axis = best_in_cap(matrix, normal, cosine)
    value, price = forms(matrix[0], axis)[0], cap_price(matrix, normal, cosine, axis)[0]
    on_grid = forms(matrix[0], cap_directions(normal[0], tilt, 6000)).max()
    assert abs(axis[0] @ normal[0]) >= cosine[0] - 1e-12
    assert np.linalg.norm(axis) == pytest.approx(1, abs=1e-12)
    assert on_grid <= price * (1 + 1e-12)
    assert price == pytest.approx(value, rel=1e-7)
    assert value >= on_grid * (1 - 1e-12)


def test_any_axis_taken_for_the_best_still_gives_a_valid_price():
    rng = np.random.default_rng(1)
    for _ in range(50):
        matrix, normal = positive(rng), np.array([[0.0, 0.0, 1.0]])
        wrong = cap_directions(normal[0], 0.4, 30)[-rng.integers(1, 10)][None]
        price = cap_price(matrix, normal, np.array([np.cos(0.4)]), wrong)[0]
        assert price >= forms(matrix[0], cap_directions(normal[0], 0.4, 3000)).max() * (1 - 1e-12)


def test_no_tilt_at_all_leaves_the_normal():
    rng = np.random.default_rng(2)
    matrix, normal = positive(rng), np.array([[0.6, 0.0, 0.8]])
    axis = best_in_cap(matrix, normal, np.ones(1))
    assert np.abs(axis @ normal.T) == pytest.approx(1, abs=1e-12)
    assert cap_price(matrix, normal, np.ones(1), axis)[0] == pytest.approx(forms(matrix[0], normal)[0], rel=1e-12)


@pytest.mark.parametrize("count", [1, 2])
def test_free_prices_are_sums_of_the_largest_eigenvalues(count):
    model, free = components_model(3, 4, electrodes=2)
    turning = Turning(model, FreeAxes(free, count))
    rng = np.random.default_rng(3)
    blocks = positive(rng, 6)
    blocks[:2, 1:] = blocks[:2, :, 1:] = 0.0  # what an ordinary candidate of one channel has
    price, frames = best_frames(turning, np.arange(6), blocks)
    expected = [blocks[0, 0, 0], blocks[1, 0, 0], *(np.linalg.eigvalsh(one)[-count:].sum() for one in blocks[2:])]
    assert price == pytest.approx(expected, rel=1e-12)
    reached = np.einsum("nkr,nkl,nlr->n", frames, blocks, frames)
    assert reached == pytest.approx(price, rel=1e-12)
    inner = frames[2:].transpose(0, 2, 1) @ frames[2:]
    assert np.allclose(inner, np.diag([1.0] * count + [0.0] * (3 - count)), atol=1e-12)


def test_the_best_ratio_is_the_generalised_eigenvalue():
    rng = np.random.default_rng(4)
    model, free = components_model(4, 5)
    above, below = positive(rng, 5) + 2 * np.eye(3), positive(rng, 5) + np.eye(3)
    for count in (1, 2):
        gain, frames = best_ratio_frames(Turning(model, FreeAxes(free, count)), np.arange(5), above, below)
        for i in range(5):
            values = eigh(above[i], below[i], eigvals_only=True)
            assert gain[i] == pytest.approx(np.log(values[-count:]).sum(), rel=1e-10)
            turned = frames[i][:, :count]
            ratio = np.linalg.slogdet(turned.T @ above[i] @ turned)[1]
            ratio -= np.linalg.slogdet(turned.T @ below[i] @ turned)[1]
            assert ratio == pytest.approx(gain[i], rel=1e-10)
            assert np.allclose(turned.T @ turned, np.eye(count), atol=1e-12)


def test_the_best_ratio_within_a_tilt_beats_a_dense_cap():
    rng = np.random.default_rng(5)
    model, free = components_model(5, 8)
    normal = rng.standard_normal((8, 3))
    above, below = positive(rng, 8) + 2 * np.eye(3), positive(rng, 8) + np.eye(3)
    gain, frames = best_ratio_frames(Turning(model, FreeAxes(free, 1, 0.3, normal)), np.arange(8), above, below)
    for i in range(8):
        grid = cap_directions(normal[i], 0.3, 4000)
        on_grid = np.log(forms(above[i], grid) / forms(below[i], grid)).max()
        assert on_grid - 1e-12 <= gain[i] <= on_grid + 1e-3
        assert frames[i][:, 0] @ normal[i] / np.linalg.norm(normal[i]) >= np.cos(0.3) - 1e-12


def test_the_grid_of_directions_covers_the_hemisphere():
    grid = directions(2000)
    probe = np.random.default_rng(6).standard_normal((300, 3))
    probe /= np.linalg.norm(probe, axis=1)[:, None]
    assert np.abs(probe @ grid.T).max(axis=1).min() > np.cos(0.06)


@pytest.mark.parametrize(
    ("changes", "sentence"),
    [
        ({"free": np.ones(3, dtype=bool)}, "free must say yes or no for each of 4 candidates"),
        ({"free": np.ones(4, dtype=bool)}, "must bring 3 components, but candidate 0 has 1"),
        ({"count": 3}, "count must be 1 or 2 axes, but candidate 1 has 3"),
        ({"tilt": -0.1}, "tilt must be at least 0, but candidate 1 has -0.1"),
        ({"tilt": np.nan}, "tilt must be at least 0, but candidate 1 has nan"),
        ({"tilt": 0.2}, "needs a normal for each of 4 candidates"),
        ({"tilt": 0.2, "normal": np.zeros((4, 3))}, "normal must be finite and not zero"),
        ({"tilt": 0.2, "count": 2, "normal": np.ones((4, 3))}, "A tilt limit needs count = 1"),
    ],
)
def test_a_description_that_does_not_fit_is_one_sentence(changes, sentence):
    model, free = components_model(7, 3, electrodes=1)
    with pytest.raises(LayoutError, match=sentence):
        Turning(model, FreeAxes(**{"free": free, **changes}))
