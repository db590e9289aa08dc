"""What a layout loses when sensors fail or sit a little elsewhere than planned."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from itertools import combinations
from math import comb, sqrt

import numpy as np

from layout.engine.goal import Goal

DRAWS = 1000  # of failures, where there are too many to go through
COVERAGE = 1.96  # standard errors to either side of a mean: 95 % of a normal distribution


@dataclass(frozen=True)
class ExpectedLoss:
    """Losses of the score [bits or m], never of the printed value: mean, and the 95 % interval of that mean.

    tail: the loss that 95 % of the cases do not pass; worst: the largest met; cases: how many; exact: whether these
    are all there are, each as likely as any other (the interval is then the mean itself).
    """

    mean: float
    low: float
    high: float
    tail: float
    worst: float
    cases: int
    exact: bool


def loss_of(losses: np.ndarray, exact: bool) -> ExpectedLoss:
    """The figures of equally likely losses (n,): all there are, or independent draws."""
    mean = float(losses.mean())
    half = 0.0 if exact or len(losses) < 2 else COVERAGE * float(losses.std(ddof=1)) / sqrt(len(losses))
    tail = float(np.quantile(losses, 0.95, method="inverted_cdf"))
    return ExpectedLoss(mean, mean - half, mean + half, tail, float(losses.max()), len(losses), exact)


def losses_of_each(goal: Goal, chosen: np.ndarray) -> np.ndarray:
    """What the score of the chosen (k,) loses without each of them (k,)."""
    state = goal.priced(chosen)
    return state.value - state.removals()


def random_failures(
    goal: Goal, chosen: np.ndarray, failing: int, rng: np.random.Generator, draws: int = DRAWS
) -> ExpectedLoss:
    """What the score loses when `failing` of the chosen (k,) fail, every set of them as likely as any other.

    Gone through one by one where there are at most `draws` such sets, drawn independently otherwise. The rest is used
    as it is: of electrodes any one that is left serves as the reference.
    """
    k = len(chosen)
    whole = goal.score(chosen)
    exact = comb(k, failing) <= draws
    if exact:
        gone = [np.array(one) for one in combinations(range(k), failing)]
    else:
        gone = [rng.choice(k, failing, replace=False) for _ in range(draws)]
    return loss_of(np.array([whole - goal.score(np.delete(chosen, one)) for one in gone]), exact)


def random_misplacement(
    draw_scores: Callable[[int], np.ndarray], whole: float, draws: int, at_once: int
) -> ExpectedLoss:
    """What the score `whole` loses with every sensor somewhat misplaced, over `draws` independent draws.

    draw_scores(n): scores (n,) of n more draws of the whole layout's poses; called with `at_once` at most.
    """
    parts = [draw_scores(min(at_once, draws - done)) for done in range(0, draws, at_once)]
    return loss_of(whole - np.concatenate(parts), exact=False)
