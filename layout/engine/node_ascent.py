"""The limit of one part of the tree: a compiled interior-point ascent of the rank-aware relaxation over linear rules.

Primal-dual barrier steps (Boyd & Vandenberghe 2004, Convex Optimization, 11.7) on a small pool of candidates. The dual
values that come with the weights make the limit by themselves, whatever the convergence: with row prices μ >= 0,

    f(S) <= f(w) - g · w + Σ_rows μ · limit + Σ_candidates max(0, g - Cᵀ μ)

over *all* candidates of the part, so no linear programme is solved. Reduced prices g - Cᵀ μ come out as well.
"""

from __future__ import annotations

import numba
import numpy as np

from layout.engine.information import BITS
from layout.engine.kernels_rank import backward, condition, forward, second_order

IN_POOL = 2e-3  # a start weight above this is in the first pool
ENTRY = 0.02  # weight with which a candidate enters a pool
ENTRANTS = 40  # most candidates that enter at once


@numba.njit(cache=True, nogil=True)
def pool_rows(
    pool: np.ndarray, start: np.ndarray, row: np.ndarray, share: np.ndarray, low: np.ndarray, high: np.ndarray
) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
    """The rules on a pool (m,) as rows C w <= d in compressed form: (pointer, column, coefficient, limit, origin).

    start, row, share: compressed columns of the rule matrix (by candidate); low, high (n_rows,): what is left of the
    rules, low -inf where it need not be kept. origin: the rule's number + 1, negative for its lower side, 0 for w <= 1.
    Rows that no weights in [0, 1] can break are left out.
    """
    m, n_rows = len(pool), len(high)
    count, most, least = np.zeros(n_rows, np.int64), np.zeros(n_rows), np.zeros(n_rows)
    for i in range(m):
        for e in range(start[pool[i]], start[pool[i] + 1]):
            r = row[e]
            count[r] += 1
            most[r] += max(share[e], 0.0)
            least[r] += min(share[e], 0.0)
    place_high, place_low = np.full(n_rows, -1), np.full(n_rows, -1)
    origin, limit, size = [np.int64(0)], [0.0], [np.int64(0)]
    origin.pop(), limit.pop(), size.pop()
    for r in range(n_rows):
        if count[r] and most[r] > high[r]:
            place_high[r] = len(origin)
            origin.append(np.int64(r + 1))
            limit.append(high[r])
            size.append(count[r])
        if count[r] and least[r] < low[r]:
            place_low[r] = len(origin)
            origin.append(np.int64(-r - 1))
            limit.append(-low[r])
            size.append(count[r])
    bounded = np.zeros(m, np.bool_)
    for i in range(m):
        for e in range(start[pool[i]], start[pool[i] + 1]):
            if place_high[row[e]] >= 0 and share[e] >= high[row[e]] > 0.0:
                bounded[i] = True  # other members of the row could have negative shares; then w <= 1 is merely not kept
        if not bounded[i]:
            origin.append(np.int64(0))
            limit.append(1.0)
            size.append(np.int64(1))
    n = len(origin)
    pointer = np.zeros(n + 1, np.int64)
    for r in range(n):
        pointer[r + 1] = pointer[r] + size[r]
    fill = pointer[:-1].copy()
    column, coefficient = np.empty(pointer[n], np.int64), np.empty(pointer[n])
    single = n
    for i in range(m - 1, -1, -1):
        if not bounded[i]:
            single -= 1
            column[fill[single]], coefficient[fill[single]] = i, 1.0
    for i in range(m):
        for e in range(start[pool[i]], start[pool[i] + 1]):
            for place, sign in ((place_high[row[e]], 1.0), (place_low[row[e]], -1.0)):
                if place >= 0:
                    column[fill[place]], coefficient[fill[place]] = i, sign * share[e]
                    fill[place] += 1
    return pointer, column, coefficient, np.array(limit), np.array(origin)


@numba.njit(cache=True, nogil=True)
def pool_problem(
    gram: np.ndarray,
    pull: np.ndarray,
    extra: np.ndarray,
    rest: np.ndarray,
    channels: np.ndarray,
    local: np.ndarray,
) -> tuple[np.ndarray, np.ndarray]:
    """Conditional nuisance Gram (q, q) and target rows (q, p) of the pool's channels.

    channels (q,): their numbers in the model; local (q,): among the channels left.
    """
    q = len(local)
    c = len(pull)
    nuisance, target = np.empty((q, q)), np.empty((q, rest.shape[1]))
    mine = np.empty((q, c))
    for i in range(q):
        target[i] = rest[local[i]]
        for a in range(c):
            mine[i, a] = pull[a, local[i]]
    known = mine @ mine.T
    for i in range(q):
        for j in range(q):
            nuisance[i, j] = gram[channels[i], channels[j]] - known[i, j] + extra[local[i]] * extra[local[j]]
    return nuisance, target


@numba.njit(cache=True, nogil=True)
def price_everywhere(
    gram: np.ndarray,
    pull: np.ndarray,
    extra: np.ndarray,
    rest: np.ndarray,
    left: np.ndarray,
    channels: np.ndarray,
    local: np.ndarray,
    known: np.ndarray,
    directions: np.ndarray,
) -> np.ndarray:
    """Price of every channel left (m,), in the units of `second_order`."""
    q, m, c = len(local), len(left), len(pull)
    seen = np.empty((q, m))
    mine = np.empty((c, q))
    own = np.empty(q)
    for i in range(q):
        row = gram[channels[i]]
        for j in range(m):
            seen[i, j] = row[left[j]]
        for a in range(c):
            mine[a, i] = pull[a, local[i]]
        own[i] = extra[local[i]]
    remainder = rest - seen.T @ known + pull.T @ (mine @ known)
    shift = own @ known
    for j in range(m):
        for a in range(rest.shape[1]):
            remainder[j, a] -= extra[j] * shift[a]
    turned = remainder @ directions
    price = np.empty(m)
    for j in range(m):
        total = 0.0
        for a in range(rest.shape[1]):
            total += turned[j, a] * turned[j, a]
        price[j] = total
    return price


@numba.njit(cache=True, nogil=True)
def bound_part(
    gram: np.ndarray,
    target: np.ndarray,
    offset: np.ndarray,
    flat: float,
    first: np.ndarray,
    chosen: np.ndarray,
    free: np.ndarray,
    begin: np.ndarray,
    start: np.ndarray,
    row: np.ndarray,
    share: np.ndarray,
    low: np.ndarray,
    high: np.ndarray,
    channels_left: int,
    cut: float,
    tolerance: float,
    loose: float,
    most_steps: int,
) -> tuple[float, float, np.ndarray, np.ndarray, np.ndarray, np.ndarray, int]:
    """(limit, value, weights, reduced, loss_out, row prices, steps) of the part of `chosen` and `free` [bits].

    gram (n, n), target (n, p), offset (n,), flat as in `condition`; first (n_candidates + 1,): first channel of each
    candidate; begin (n_free,): start weights; start, row, share, low, high: the rules that are left, as in `pool_rows`;
    channels_left: the most channels that may still join. Ends as soon as the limit is within `cut`, or the value so far
    above it that no tangent can be. reduced (n_free,): a candidate with a negative one costs the limit that much if it
    must join; loss_out (n_free,): what the limit loses at least if the candidate must not.
    """
    rows = _channels(first, chosen)
    left = _channels(first, free)
    pull, extra, rest = condition(gram, target, offset, rows, left, flat)
    n = len(free)
    place = np.zeros(n + 1, np.int64)
    for i in range(n):
        place[i + 1] = place[i] + first[free[i] + 1] - first[free[i]]
    member = begin > IN_POOL
    weights = np.zeros(n)
    for i in range(n):
        if member[i]:
            weights[i] = min(0.98 * begin[i], 0.98)
    if not member.any():
        _enter_strongest(rest, place, member, weights, 3 * channels_left + 10)
    best_limit = np.inf
    best_value = 0.0
    best_weights, best_reduced, best_charge = weights, np.zeros(n), np.zeros(len(high))
    steps = 0
    charge = np.zeros(len(high))
    level = 0.0
    while True:
        pool = np.flatnonzero(member)
        numbers = free[pool]
        pointer, column, coefficient, limit, origin = pool_rows(numbers, start, row, share, low, high)
        channels = _channels(first, numbers)
        local = np.empty(len(channels), np.int64)
        owner = np.empty(len(channels), np.int64)
        at = 0
        for i in range(len(pool)):
            for c in range(place[pool[i]], place[pool[i] + 1]):
                local[at], owner[at] = c, i
                at += 1
        nuisance, aims = pool_problem(gram, pull, extra, rest, channels, local)
        w = weights[pool]
        m, n_rows = len(pool), len(limit)
        slack = np.empty(n_rows)
        dual = np.empty(n_rows)
        fresh = True
        z = np.empty(m)
        value = 0.0
        inner = 0
        while True:
            raw, price, fine, known, directions = second_order(nuisance, aims, w[owner], channels_left)
            value = BITS * raw
            slope = np.zeros(m)
            for i in range(len(owner)):
                slope[owner[i]] += BITS * price[i]
            load = np.zeros(n_rows)
            for r in range(n_rows):
                for e in range(pointer[r], pointer[r + 1]):
                    load[r] += coefficient[e] * w[column[e]]
            if fresh:
                if level == 0.0:
                    level = 0.1 * (slope @ w) / (m + n_rows)
                for r in range(n_rows):
                    slack[r] = max(limit[r] - load[r], 0.02)
                    dual[r] = level / slack[r]
                    known_price = charge[abs(origin[r]) - 1] if origin[r] > 0 else 0.0
                    if known_price > dual[r]:
                        dual[r] = known_price
                        slack[r] = max(slack[r] if limit[r] - load[r] > 0.02 else level / known_price, 1e-6)
                for i in range(m):
                    z[i] = level / w[i]
                fresh = False
            paid = np.zeros(m)
            ceiling = value - slope @ w
            for r in range(n_rows):
                if origin[r] != 0:
                    ceiling += dual[r] * limit[r]
                    for e in range(pointer[r], pointer[r + 1]):
                        paid[column[e]] += coefficient[e] * dual[r]
            for i in range(m):
                ceiling += max(0.0, slope[i] - paid[i])
            gap = ceiling - value
            settled = gap <= tolerance * abs(value) or (value > cut and gap <= loose * (value - cut))
            if inner and (settled or ceiling <= cut or inner >= 14 or steps >= most_steps):
                break
            inner += 1
            steps += 1
            level = _step(fine, owner, slope, w, z, slack, dual, limit, load, pointer, column, coefficient)
        everywhere = price_everywhere(gram, pull, extra, rest, left, channels, local, known, directions)
        charge[:] = 0.0
        lower_charge = np.zeros(len(high))
        total = value - slope @ w
        for r in range(n_rows):
            if origin[r] != 0:
                total += dual[r] * limit[r]
                if origin[r] > 0:
                    charge[origin[r] - 1] = dual[r]
                else:
                    lower_charge[-origin[r] - 1] = dual[r]
        reduced = np.empty(n)
        breach = 0.0
        for i in range(n):
            gain = 0.0
            for c in range(place[i], place[i + 1]):
                gain += BITS * everywhere[c]
            for e in range(start[free[i]], start[free[i] + 1]):
                gain -= share[e] * (charge[row[e]] - lower_charge[row[e]])
            reduced[i] = gain
            total += max(0.0, gain)
            if not member[i]:
                breach += max(0.0, gain)
        weights = np.zeros(n)
        for i in range(m):
            weights[pool[i]] = w[i]
        if total < best_limit:
            best_limit, best_value, best_weights, best_reduced = total, value, weights, reduced
            best_charge = charge.copy()
        gap = total - value
        settled = gap <= tolerance * abs(value) or (value > cut and gap <= loose * (value - cut))
        if best_limit <= cut or settled or steps >= most_steps:
            break
        entrants = 0
        order = np.argsort(-reduced)
        for i in order:
            if reduced[i] <= 0.0 or entrants >= ENTRANTS:
                break
            if not member[i]:
                member[i] = True
                weights[i] = ENTRY
                entrants += 1
        if entrants:
            level *= 4.0
    loss_out = _losses_out(best_reduced, free, start, row, share, high, best_charge)
    return best_limit, best_value, best_weights, best_reduced, loss_out, best_charge, steps


@numba.njit(cache=True, nogil=True)
def _channels(first: np.ndarray, candidates: np.ndarray) -> np.ndarray:
    count = 0
    for j in candidates:
        count += first[j + 1] - first[j]
    out = np.empty(count, np.int64)
    at = 0
    for j in candidates:
        for c in range(first[j], first[j + 1]):
            out[at] = c
            at += 1
    return out


@numba.njit(cache=True, nogil=True)
def _enter_strongest(rest: np.ndarray, place: np.ndarray, member: np.ndarray, weights: np.ndarray, count: int) -> None:
    power = np.zeros(len(member))
    for i in range(len(member)):
        for c in range(place[i], place[i + 1]):
            power[i] += (rest[c] * rest[c]).sum()
    for i in np.argsort(-power)[:count]:
        member[i], weights[i] = True, 0.2


@numba.njit(cache=True, nogil=True)
def _step(
    fine: np.ndarray,
    owner: np.ndarray,
    slope: np.ndarray,
    w: np.ndarray,
    z: np.ndarray,
    slack: np.ndarray,
    dual: np.ndarray,
    limit: np.ndarray,
    load: np.ndarray,
    pointer: np.ndarray,
    column: np.ndarray,
    coefficient: np.ndarray,
) -> float:
    """One primal-dual Newton step in place; the mean complementarity after it."""
    m, n_rows = len(w), len(limit)
    mean = ((z * w).sum() + (dual * slack).sum()) / (m + n_rows)
    aim = 0.15 * mean
    system = np.zeros((m, m))
    for i in range(len(owner)):
        for j in range(len(owner)):
            system[owner[i], owner[j]] += BITS * fine[i, j]
    right = np.empty((m, 1))
    for i in range(m):
        system[i, i] += z[i] / w[i]
        right[i, 0] = slope[i] + aim / w[i]
    miss = limit - load - slack
    for r in range(n_rows):
        ratio = dual[r] / slack[r]
        shift = (aim - dual[r] * miss[r]) / slack[r]
        for e in range(pointer[r], pointer[r + 1]):
            right[column[e], 0] -= coefficient[e] * shift
            scaled = ratio * coefficient[e]
            for d in range(pointer[r], pointer[r + 1]):
                system[column[e], column[d]] += scaled * coefficient[d]
    for i in range(m):
        system[i, i] *= 1.0 + 1e-12
    lower = np.linalg.cholesky(system)
    forward(lower, right)
    backward(lower, right)
    move = right[:, 0]
    stride, dual_stride = 1.0, 1.0
    of_z = np.empty(m)
    for i in range(m):
        of_z[i] = (aim - z[i] * w[i] - z[i] * move[i]) / w[i]
        if move[i] < 0.0:
            stride = min(stride, -0.95 * w[i] / move[i])
        if of_z[i] < 0.0:
            dual_stride = min(dual_stride, -0.95 * z[i] / of_z[i])
    of_slack, of_dual = np.empty(n_rows), np.empty(n_rows)
    for r in range(n_rows):
        along = 0.0
        for e in range(pointer[r], pointer[r + 1]):
            along += coefficient[e] * move[column[e]]
        of_slack[r] = miss[r] - along
        of_dual[r] = (aim - dual[r] * slack[r] - dual[r] * of_slack[r]) / slack[r]
        if of_slack[r] < 0.0:
            stride = min(stride, -0.95 * slack[r] / of_slack[r])
        if of_dual[r] < 0.0:
            dual_stride = min(dual_stride, -0.95 * dual[r] / of_dual[r])
    total = 0.0
    for i in range(m):
        w[i] += stride * move[i]
        z[i] += dual_stride * of_z[i]
        total += w[i] * z[i]
    for r in range(n_rows):
        slack[r] += stride * of_slack[r]
        dual[r] += dual_stride * of_dual[r]
        total += slack[r] * dual[r]
    return total / (m + n_rows)


@numba.njit(cache=True, nogil=True)
def _losses_out(
    reduced: np.ndarray,
    free: np.ndarray,
    start: np.ndarray,
    row: np.ndarray,
    share: np.ndarray,
    high: np.ndarray,
    charge: np.ndarray,
) -> np.ndarray:
    """What the limit loses at least without each candidate.

    A row of equal shares whose other members are all unprofitable can drop its price until one of them breaks even.
    """
    n_rows = len(high)
    best, second, leader = np.full(n_rows, -np.inf), np.full(n_rows, -np.inf), np.full(n_rows, -1)
    even = np.ones(n_rows, np.bool_)
    for i in range(len(free)):
        for e in range(start[free[i]], start[free[i] + 1]):
            r = row[e]
            even[r] = even[r] and share[e] == 1.0
            if reduced[i] > best[r]:
                best[r], second[r], leader[r] = reduced[i], best[r], i
            elif reduced[i] > second[r]:
                second[r] = reduced[i]
    out = np.empty(len(free))
    for i in range(len(free)):
        drop = 0.0
        for e in range(start[free[i]], start[free[i] + 1]):
            r = row[e]
            rival = second[r] if leader[r] == i else best[r]
            if even[r] and high[r] == 1.0 and rival < 0.0:
                drop = max(drop, min(charge[r], -rival))
        out[i] = max(reduced[i], 0.0) + drop
    return out
