"""Values of turned sets, closed-form best axes and general climbing, against a general optimiser."""

import numpy as np
import pytest
from axis_instances import bits, cap_directions, components_model, directions
from scipy.optimize import minimize

from layout.engine.axis_climb import climb_axes, within_tilt
from layout.engine.axis_freedom import FreeAxes, Turning
from layout.engine.axis_gains import TurnedSet
from layout.engine.axis_search import turn


def unit(rng, n):
    vectors = rng.standard_normal((n, 3))
    return vectors / np.linalg.norm(vectors, axis=1)[:, None]


def mixed(seed, count=1, **limits):
    """Three electrodes and two magnetometers of random axes: turning, chosen, frames, axes as the brute force takes."""
    model, free = components_model(seed, 5, electrodes=4)
    turning = Turning(model, FreeAxes(free, count, **limits))
    rng = np.random.default_rng(seed)
    chosen = np.array([0, 2, 3, 5, 8])
    frames = turning.own[chosen]
    axes = [None, None, None]
    for place in (3, 4):
        plane = np.linalg.qr(rng.standard_normal((3, count)))[0]
        frames[place] = 0.0
        frames[place, :, :count] = plane
        axes.append(plane.T)
    return model, turning, chosen, frames, axes


@pytest.mark.parametrize("count", [1, 2])
def test_value_and_every_change_agree_with_the_rows(count):
    model, turning, chosen, frames, axes = mixed(1, count)
    state = TurnedSet(turning, chosen, frames)
    assert state.value == pytest.approx(bits(model, chosen, axes), rel=1e-10)
    score, best = state.additions()
    for j in (1, 4, 6, 7):
        own = None if j < 4 else best[j][:, :count].T
        assert score[j] == pytest.approx(bits(model, [*chosen, j], [*axes, own]), rel=1e-10)
    for place in range(5):
        score, best = state.swaps(place)
        for j in (1, 6, 7, chosen[place]):
            others, turned = list(chosen), list(axes)
            others[place], turned[place] = j, None if j < 4 else best[j][:, :count].T
            assert score[j] == pytest.approx(bits(model, others, turned), rel=1e-9)
        assert np.isneginf(score[np.delete(chosen, place)]).all()


def test_without_an_electrode_the_offset_plays_no_part():
    model, turning, _, _, _ = mixed(2)
    chosen, frames = np.array([5]), np.zeros((1, 3, 3))
    frames[0, 2, 0] = 1.0
    score, best = TurnedSet(turning, chosen, frames).additions()
    assert score[0] == pytest.approx(bits(model, [5], [np.eye(3)[2]]), rel=1e-10)  # a first electrode carries nothing
    assert score[6] == pytest.approx(bits(model, [5, 6], [np.eye(3)[2], best[6][:, 0]]), rel=1e-10)


@pytest.mark.parametrize("electrodes", [True, False])
def test_the_closed_form_axis_is_what_a_general_optimiser_finds(electrodes):
    for seed in range(5):
        model, turning, chosen, frames, axes = mixed(seed + 10)
        if not electrodes:
            chosen, frames, axes = chosen[3:], frames[3:], axes[3:]
        place = len(chosen) - 1
        score, _ = TurnedSet(turning, chosen, frames).swaps(place)

        def loss(vector, chosen=chosen, axes=axes, model=model):
            return -bits(model, chosen, [*axes[:-1], vector / np.linalg.norm(vector)])

        found = max(-minimize(loss, start, method="BFGS").fun for start in directions(6))
        assert score[chosen[place]] == pytest.approx(found, rel=1e-7)


def test_turning_ends_at_a_maximum_over_all_axes_together():
    for seed in range(4):
        model, turning, chosen, frames, _ = mixed(seed + 20)
        before = TurnedSet(turning, chosen, frames).value
        layout = turn(turning, chosen, frames)
        found = [layout.frames[place, :, 0] for place in (3, 4)]
        assert layout.value >= before
        assert layout.value == pytest.approx(bits(model, chosen, [None] * 3 + found), rel=1e-10)

        def loss(flat, model=model, chosen=chosen):
            turned = flat.reshape(2, 3)
            return -bits(model, chosen, [None] * 3 + list(turned / np.linalg.norm(turned, axis=1)[:, None]))

        polished = -minimize(loss, np.concatenate(found), method="BFGS").fun
        assert layout.value >= polished - 1e-6 * abs(polished)


def test_turning_respects_the_tilt_and_is_best_on_a_dense_cap():
    normal = np.tile([0.0, 0.6, 0.8], (9, 1))
    model, turning, chosen, frames, _ = mixed(30, tilt=0.3, normal=normal)
    frames[3:, :, 0] = normal[0]
    layout = turn(turning, chosen, frames)
    found = [layout.frames[place, :, 0] for place in (3, 4)]
    assert min(abs(one @ normal[0]) for one in found) >= np.cos(0.3) - 1e-9
    for place in (0, 1):
        for trial in cap_directions(normal[0], 0.3, 300):
            turned = [None] * 3 + [trial if one == place else found[one] for one in (0, 1)]
            assert bits(model, chosen, turned) <= layout.value + 1e-9


def test_climbing_reaches_what_turning_reaches():
    model, turning, chosen, frames, _ = mixed(40)
    chosen, frames = chosen[3:], frames[3:]

    def score_and_gradient(axes, step=1e-5):
        slope = np.zeros_like(axes)
        for place in np.ndindex(axes.shape):
            change = np.zeros_like(axes)
            change[place] = step
            slope[place] = (bits(model, chosen, axes + change) - bits(model, chosen, axes - change)) / (2 * step)
        return bits(model, chosen, axes), slope

    start = frames[:, :, 0]
    axes, score = climb_axes(score_and_gradient, start)
    assert np.linalg.norm(axes, axis=1) == pytest.approx(1, abs=1e-12)
    assert score == pytest.approx(turn(turning, chosen, frames).value, rel=1e-6)
    normal, cosine = unit(np.random.default_rng(1), 2), np.array([np.cos(0.2), 0.0])
    limited, lower = climb_axes(score_and_gradient, start, normal, cosine)
    assert abs(limited[0] @ normal[0]) >= cosine[0] - 1e-9
    grid = cap_directions(normal[0], 0.2, 200)
    assert lower >= max(bits(model, chosen, [one, limited[1]]) for one in grid) - 1e-6


def test_an_axis_outside_its_tilt_goes_to_the_nearest_place_on_the_rim():
    rng = np.random.default_rng(5)
    axes, normal = unit(rng, 50), unit(rng, 50)
    cosine = np.full(50, np.cos(0.5))
    back = within_tilt(axes, normal, cosine)
    for one, old, middle in zip(back, axes, normal, strict=True):
        grid = cap_directions(middle, 0.5, 3000)
        assert np.abs(one @ middle) >= np.cos(0.5) - 1e-12
        assert np.abs(one @ old) >= np.abs(grid @ old).max() - 1e-9
