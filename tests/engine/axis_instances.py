"""Random models with free axes and brute force over sites and axes; shares no formula with the engine."""

from itertools import combinations, product

import numpy as np
from engine_instances import contrast_information
from scipy.optimize import minimize

from layout.engine.feasible import Feasible
from layout.engine.model import LinearModel


def components_model(seed, n_sites, n_target=3, n_nuisance=4, scale=1.0, electrodes=0):
    """Electrodes of one channel that see the offset, then free sites of three components; and which are free."""
    rng = np.random.default_rng(seed)
    widths = np.repeat([1, 3], [electrodes, n_sites])
    owner = np.repeat(np.arange(len(widths)), widths)
    n = len(owner)
    offset = np.where(np.arange(n) < electrodes, 1.0, 0.0)
    target, nuisance = scale * rng.standard_normal((n, n_target)), rng.standard_normal((n, n_nuisance))
    return LinearModel(target, nuisance, offset, owner), widths == 3


def any_of(n, k, cliques=()):
    """k of n candidates."""
    return Feasible(np.zeros(n, dtype=int), np.array([k]), cliques)


def turned_rows(model, chosen, axes):
    """An ordinary model of the chosen alone: axes[i] (r, 3) are the axes of chosen[i], None for an ordinary one."""
    parts, owner = [], []
    for number, (one, own) in enumerate(zip(chosen, axes, strict=True)):
        rows = np.flatnonzero(model.candidate_of_channel == one)
        mix = np.eye(len(rows)) if own is None else np.atleast_2d(own)
        parts.append([mix @ model.target[rows], mix @ model.nuisance[rows], mix @ model.offset[rows]])
        owner += [number] * len(mix)
    target, nuisance, offset = (np.concatenate(part) for part in zip(*parts, strict=True))
    return LinearModel(target, nuisance, offset, np.array(owner))


def bits(model, chosen, axes):
    """Information of turned sensors by the contrasts that do not see the offset."""
    return contrast_information(turned_rows(model, chosen, axes), np.arange(len(chosen)))


def directions(n):
    """n directions spread over a hemisphere (Fibonacci's spiral)."""
    place = np.arange(n) + 0.5
    up = place / n
    angle = np.pi * (1 + 5**0.5) * place
    flat = np.sqrt(1 - up**2)
    return np.stack([flat * np.cos(angle), flat * np.sin(angle), up], axis=1)


def cap_directions(normal, tilt, n):
    """n directions over the cap around a normal, the last third on its rim."""
    z = normal / np.linalg.norm(normal)
    x = np.cross(z, np.eye(3)[np.abs(z).argmin()])
    x /= np.linalg.norm(x)
    y = np.cross(z, x)
    inner = 2 * n // 3
    along = np.append(1 - (1 - np.cos(tilt)) * (np.arange(inner) + 0.5) / inner, np.full(n - inner, np.cos(tilt)))
    angle = np.append(np.pi * (1 + 5**0.5) * np.arange(inner), 2 * np.pi * np.arange(n - inner) / (n - inner))
    flat = np.sqrt(1 - along**2)
    return along[:, None] * z + flat[:, None] * (np.cos(angle)[:, None] * x + np.sin(angle)[:, None] * y)


def best_by_grid(model, free, k, grids, allowed=lambda chosen: True):
    """(bits, chosen, axes) of the best layout whose free axes lie on grids[i] (n_i, 3), all subsets and axes tried."""
    best = (-np.inf, None, None)
    for chosen in combinations(range(len(free)), k):
        if not allowed(chosen):
            continue
        options = [[None] if not free[i] else list(grids[i]) for i in chosen]
        for axes in product(*options):
            value = bits(model, chosen, axes)
            if value > best[0]:
                best = (value, chosen, axes)
    return best


def refined(model, chosen, axes):
    """Bits after moving the free axes to a local maximum with a general optimiser."""
    free = [i for i, one in enumerate(axes) if one is not None]

    def loss(flat):
        turned = list(axes)
        for i, vector in zip(free, flat.reshape(-1, 3), strict=True):
            turned[i] = vector / np.linalg.norm(vector)
        return -bits(model, chosen, turned)

    start = np.concatenate([axes[i] for i in free])
    return -minimize(loss, start, method="BFGS").fun
