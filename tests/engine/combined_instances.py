"""Goals over the same eight candidates, and combinations of them with their scores by brute force."""

import numpy as np
from engine_instances import contrast_information, random_model
from localisation_instances import CASES, bordered_score, random_localisation

from layout.engine.combined import WeightedSum, Worst
from layout.engine.combined_loss import AnyOneLost
from layout.engine.information_goal import InformationGoal
from layout.engine.localisation import LocalisationGoal

N = 8


def _bits(case, seed, scale=1.0):
    widths, electrodes = CASES[case]
    goal = InformationGoal(random_model(np.random.default_rng([17, seed]), widths, electrodes, scale=scale))
    return goal, lambda chosen: contrast_information(goal.model, chosen) if len(chosen) else 0.0


def _error(case, seed, kind, sharpness):
    goal = LocalisationGoal(random_localisation(case, seed), kind, sharpness)
    return goal, lambda chosen: bordered_score(goal.model, chosen, kind)


def lost(brute):
    """The brute force of AnyOneLost from that of its goal."""
    return lambda s: min((brute(np.delete(s, i)) for i in range(len(s))), default=brute(s))


def combination(name, case, seed=0, sharpness=None):
    """(goal, brute force of its score); sharpness: of every soft minimum, None for the defaults."""
    soft = {} if sharpness is None else {"sharpness": sharpness}
    bits = [_bits(case, seed + s, scale) for s, scale in ((0, 1.0), (100, 0.5), (200, 2.0))]
    error, brute_error = _error(case, seed, "rms", 100.0)
    if name == "sum":
        goal = WeightedSum((bits[0][0], bits[1][0], error), (0.7, 2.0, 50.0), 3.0)
        return goal, lambda s: 3.0 + 0.7 * bits[0][1](s) + 2.0 * bits[1][1](s) + 50.0 * brute_error(s)
    if name == "worst":
        return Worst(tuple(g for g, _ in bits), **soft), lambda s: min(brute(s) for _, brute in bits)
    if name == "worst errors":
        parts = [_error(case, seed + s, "rms", 100.0) for s in (0, 100)]
        return Worst(tuple(g for g, _ in parts), **soft), lambda s: min(brute(s) for _, brute in parts)
    if name == "lost":
        return AnyOneLost(bits[0][0], **soft), lost(bits[0][1])
    if name == "lost error":
        return AnyOneLost(error, **soft), lost(brute_error)
    inner = AnyOneLost(bits[0][0], **soft)
    return Worst((inner, bits[1][0]), **soft), lambda s: min(lost(bits[0][1])(s), bits[1][1](s))


NAMES = ("sum", "worst", "worst errors", "lost", "lost error", "nested")
EXACT = ("sum",)  # relaxation equal to the score at sets; the others' is the soft minimum above it
