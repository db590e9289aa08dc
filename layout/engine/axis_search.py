"""Greedy construction and exchange over allowed sets with free axes: every arrival comes at its best axis."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from layout.engine.axis_freedom import TurnedChannels, Turning
from layout.engine.axis_gains import TurnedSet
from layout.engine.axis_prices import best_ratio_frames
from layout.engine.axis_turns import turn_in_place
from layout.engine.feasible import Feasible
from layout.engine.information import pair_information
from layout.engine.search import SMALLEST_SCALE, improves

SWEEPS = 300  # rounds of turns at most; each raises the information


@dataclass(frozen=True)
class Turned:
    """A layout: chosen (k,) sorted candidates, their frames (k, m, m) and information [bits]."""

    chosen: np.ndarray
    frames: np.ndarray
    value: float


def start_frames(turning: Turning, chosen: np.ndarray) -> np.ndarray:
    """The frames (k, m, m) that would be best for each candidate alone."""
    above, below = (np.eye(turning.width) + block[chosen] for block in turning.blocks)
    return best_ratio_frames(turning, np.asarray(chosen, dtype=int), above, below)[1]


def turn(turning: Turning, chosen: np.ndarray, frames: np.ndarray, tolerance: float = 1e-10) -> Turned:
    """Set every sensor to its best axis given the others, one after the other, until a round gains less (relative).

    Stops at a local maximum over the axes; the information never falls on the way.
    """
    order = np.argsort(chosen, kind="stable")
    chosen, frames = np.array(chosen, dtype=int)[order], frames[order]
    part = turning.part(chosen)
    m = part.width
    quick = part.free & (part.count == 1) & ~part.limited
    value = -np.inf
    for _ in range(SWEEPS):
        _turn_quickly(part, frames, quick, tolerance)
        state = TurnedSet(part, np.arange(len(chosen)), frames[:, :m, :m])
        before, value = value, state.value
        if not (part.free & ~quick).any() or value - before <= tolerance * max(abs(value), SMALLEST_SCALE):
            break
        for place in np.flatnonzero(part.free & ~quick):
            score, best = state.swaps(place)
            if improves(score[place], state.value):
                frames[place, :m, :m] = best[place]
                state = TurnedSet(part, np.arange(len(chosen)), frames[:, :m, :m])
    return Turned(chosen, frames, TurnedSet(part, np.arange(len(chosen)), frames[:, :m, :m]).value)


def _turn_quickly(part: Turning, frames: np.ndarray, quick: np.ndarray, tolerance: float) -> None:
    """Turn all single axes without a tilt limit, in place."""
    m = part.width
    table = TurnedChannels(part, np.arange(len(frames)), frames[:, :m, :m])
    mixing = np.ascontiguousarray(table.own_noise()[:, :-1].T)
    columns = np.flatnonzero(quick[table.candidate_of_channel])
    if not len(columns):
        return
    own = table.candidate_of_channel[columns]
    starts = part.model.channels[own, 0]
    grams = [np.ascontiguousarray(gram[:-1, :-1]) for gram in (part.model.both_gram, part.model.nuisance_gram)]
    turn_in_place(*grams, mixing, table.offset, columns, starts, tolerance, SWEEPS)
    frames[own, :3, 0] = np.stack([mixing[starts + place, columns] for place in range(3)], axis=1)


def greedy_axes(turning: Turning, feasible: Feasible, chosen: np.ndarray, frames: np.ndarray) -> Turned:
    """Add the candidate and axis of largest gain until nothing can join; chosen (k0,) in frames stay as they are."""
    chosen = np.asarray(chosen, dtype=int)
    if not turning.model.has_offset[chosen].any():
        pair = _best_pair(turning, feasible, chosen)
        chosen, frames = np.append(chosen, pair), np.concatenate([frames, turning.own[pair]])
    while True:
        allowed = feasible.addable(chosen)
        if not allowed.any():
            break
        score, best = TurnedSet(turning, chosen, frames).additions()
        arriving = int(np.argmax(np.where(allowed, score, -np.inf)))
        chosen, frames = np.append(chosen, arriving), np.concatenate([frames, best[arriving][None]])
    if not feasible.allows(chosen):  # adding one by one has run aground: keep as many as the rules permit
        price = np.zeros(feasible.n_candidates)
        price[chosen] = 1.0
        repaired = feasible.any_set(price)
        known = dict(zip(chosen.tolist(), frames, strict=True))
        fresh = start_frames(turning, repaired)
        chosen = repaired
        frames = np.stack([known.get(int(one), new) for one, new in zip(repaired, fresh, strict=True)])
    return turn(turning, chosen, frames)


def _best_pair(turning: Turning, feasible: Feasible, chosen: np.ndarray) -> np.ndarray:
    """The two electrodes of largest information together, where two may join: the first alone carries nothing."""
    electrodes = np.flatnonzero(feasible.addable(chosen) & turning.model.has_offset)
    single = (turning.model.channels[electrodes] < turning.model.n_channels).sum(axis=1) == 1
    electrodes = electrodes[single]
    if len(electrodes) < 2:
        return np.zeros(0, dtype=int)
    table = pair_information(turning.model, electrodes)
    np.fill_diagonal(table, -np.inf)
    for row in np.argsort(-table.max(axis=1), kind="stable"):
        joined = feasible.addable(np.append(chosen, electrodes[row]))[electrodes]
        if joined.any():
            return electrodes[[row, int(np.argmax(np.where(joined, table[row], -np.inf)))]]
    return np.zeros(0, dtype=int)


def exchange_axes(turning: Turning, feasible: Feasible, layout: Turned) -> Turned:
    """Swap one sensor for another at its best axis, or turn one, until nothing gains; all axes settle in between."""
    while len(layout.chosen):
        chosen, frames = layout.chosen.copy(), layout.frames.copy()
        state = TurnedSet(turning, chosen, frames)
        allowed = feasible.swappable(chosen)
        best, change = layout.value, None
        for place in range(len(chosen)):
            score, turned = state.swaps(place)
            score = np.where(allowed[place], score, -np.inf)
            arriving = int(np.argmax(score))
            if score[arriving] > best:
                best, change = score[arriving], (place, arriving, turned[arriving])
        if change is None or not improves(best, layout.value):
            break
        place, chosen[place], frames[place] = change
        trial = turn(turning, chosen, frames, 1e-5)
        if not improves(trial.value, layout.value):  # the table promised less than its rounding
            break
        layout = trial
    return turn(turning, layout.chosen, layout.frames)
