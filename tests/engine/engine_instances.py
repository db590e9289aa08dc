"""Random models, rule sets and the brute force that the engine is compared with; shares no formula with it."""

from itertools import combinations

import numpy as np

from layout.engine.feasible import Feasible
from layout.engine.model import LinearModel


def random_model(rng, widths, electrodes=(), n_target=3, n_nuisance=4, scale=1.0):
    """A LinearModel: candidate j brings widths[j] channels; first channels of `electrodes` see the offset."""
    owner = np.repeat(np.arange(len(widths)), widths)
    n = len(owner)
    offset = np.zeros(n)
    first = np.searchsorted(owner, np.asarray(electrodes, dtype=int))
    offset[first] = rng.uniform(0.5, 2.0, len(first))
    return LinearModel(
        scale * rng.standard_normal((n, n_target)), scale * rng.standard_normal((n, n_nuisance)), offset, owner
    )


def reordered(model, order):
    """The model with its candidates renumbered: new candidate i is old candidate order[i]."""
    rows = [np.flatnonzero(model.candidate_of_channel == j) for j in order]
    owner = np.repeat(np.arange(len(order)), [len(r) for r in rows])
    rows = np.concatenate(rows)
    return LinearModel(model.target[rows], model.nuisance[rows], model.offset[rows], owner)


def rows_of(model, chosen):
    """Channels of the chosen candidates."""
    return np.flatnonzero(np.isin(model.candidate_of_channel, chosen))


def contrast_information(model, chosen):
    """Bits of a set, with a flat offset removed by an orthonormal basis of the contrasts that do not see it."""
    rows = rows_of(model, chosen)
    a, b, o = model.target[rows], model.nuisance[rows], model.offset[rows]
    noise = np.eye(len(rows)) + b @ b.T
    if (o != 0).any():
        basis = np.linalg.svd(o[:, None])[0][:, 1:]
        a, noise = basis.T @ a, basis.T @ noise @ basis
    snr = np.linalg.solve(noise, a @ a.T)
    return 0.5 * np.linalg.slogdet(np.eye(len(snr)) + snr)[1] / np.log(2)


def brute_information(model, subsets):
    """Bits of many sets (n_sets, k) at once, a flat offset by the bordered determinant det [[K, o], [oᵀ, 0]]."""
    n = model.n_channels
    width = int(np.bincount(model.candidate_of_channel).max())
    table = np.full((model.candidate_of_channel[-1] + 1, width), n)
    for j in range(len(table)):
        rows = np.flatnonzero(model.candidate_of_channel == j)
        table[j, : len(rows)] = rows
    channels = table[subsets].reshape(len(subsets), -1)
    offset = np.append(model.offset, 0.0)[channels]
    seen = (offset != 0).any(axis=1)
    total = np.zeros(len(subsets))
    for sign, rows in ((1, np.hstack([model.target, model.nuisance])), (-1, model.nuisance)):
        padded = np.vstack([rows, np.zeros((1, rows.shape[1]))])
        size = channels.shape[1]
        bordered = np.zeros((len(subsets), size + 1, size + 1))
        block = padded[channels]
        bordered[:, :size, :size] = np.eye(size) + block @ block.transpose(0, 2, 1)
        bordered[:, :size, size] = bordered[:, size, :size] = offset
        bordered[~seen, size, size] = 1.0
        total += sign * np.linalg.slogdet(bordered)[1]
    return 0.5 * total / np.log(2)


def allowed_subsets(feasible):
    """Every set that keeps the rules (n_sets, k), by trying all of them."""
    n, k = feasible.n_candidates, feasible.size
    subsets = np.array(list(combinations(range(n), k)), dtype=int).reshape(-1, k)
    member = np.zeros((len(subsets), n), dtype=bool)
    np.put_along_axis(member, subsets, True, axis=1)
    good = np.ones(len(subsets), dtype=bool)
    for g, count in enumerate(feasible.counts):
        good &= member[:, feasible.group == g].sum(axis=1) == count
    for clique in feasible.cliques:
        good &= member[:, clique].sum(axis=1) <= 1
    for j in feasible.keep:
        good &= member[:, j]
    for members, limit in feasible.at_most:
        good &= member[:, members].sum(axis=1) <= limit
    return subsets[good]


def spacing_pairs(rng, n, distance):
    """Pairs of points of the unit square that are closer than `distance`."""
    points = rng.random((n, 2))
    gap = np.linalg.norm(points[:, None] - points[None], axis=-1)
    return tuple(np.array(pair) for pair in np.argwhere(np.triu(gap < distance, 1)))


def cells_of(n_cells, width):
    """Cliques of `width` adjacent candidates."""
    return tuple(np.arange(c * width, (c + 1) * width) for c in range(n_cells))


KINDS = ("plain", "cells", "spacing", "offset", "blocks", "groups", "keep", "zone limit", "offset and spacing", "mixed")


def random_instance(kind, seed, n_target=3, small=False):
    """(model, feasible, places) of one kind with n <= 25 candidates and k <= 5; small: n <= 16."""
    rng = np.random.default_rng([KINDS.index(kind), seed])
    k = int(rng.integers(2, 6))
    n = int(rng.integers(10, 26)) if k < 5 else int(rng.integers(10, 19))
    n = 10 + (n - 10) % 7 if small else n
    scale = float(rng.choice([0.3, 1.0, 3.0]))
    one = np.zeros(n, dtype=int)
    widths, electrodes, cliques, keep, at_most, places = np.ones(n, dtype=int), (), (), (), (), None
    group, counts = one, np.array([k])
    if kind == "cells":
        n = 3 * (n // 3)
        widths, group, cliques = np.ones(n, dtype=int), np.zeros(n, dtype=int), cells_of(n // 3, 3)
        places = np.repeat(np.arange(n // 3), 3)
        counts = np.array([min(k, n // 3 - 1)])
    if kind in ("spacing", "offset and spacing"):
        cliques, counts = spacing_pairs(rng, n, 0.2), np.array([min(k, 4)])
    if kind in ("offset", "offset and spacing"):
        electrodes = np.arange(n)
    if kind == "blocks":
        widths = rng.integers(1, 4, n)
    if kind in ("groups", "mixed"):
        half = n // 2
        group = (np.arange(n) >= half).astype(int)
        counts = np.array([min(k, 3), 2])
    if kind == "mixed":
        electrodes = np.arange(half)
        widths = np.where(group == 1, 3, 1)
        keep = (0,)
        cliques = (np.array([1, 2, half]), np.array([2, 3]), np.array([half + 1, half + 2]))
    if kind == "keep":
        keep = (1, 4)
        cliques = (np.array([1, 2, 3]), np.array([5, 6]))
    if kind == "zone limit":
        at_most = ((np.arange(n // 2), 1), (np.arange(n // 3, n - 2), 2))
        counts = np.array([min(k, 3)])
    model = random_model(rng, widths, electrodes, n_target=n_target, scale=scale)
    return model, Feasible(group, counts, cliques, keep, at_most), places
