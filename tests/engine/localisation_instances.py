"""Random localisation models and the rules they are searched under; shares no formula with the engine."""

import numpy as np

from layout.engine.localisation import LocalisationModel

CASES = {
    "plain": ([1] * 8, ()),
    "offset": ([1] * 8, range(8)),
    "blocks": ([3, 1, 2, 3, 2, 1, 3, 2], ()),
    "mixed": ([1, 1, 3, 1, 2, 1, 1, 3], (0, 1, 2, 3, 5)),
}


def random_localisation(case, seed=0, m=4, p=5, n_nuisance=3, scale=1.0):
    """A LocalisationModel of one of the CASES: (channels of each candidate, candidates that see the offset)."""
    widths, electrodes = CASES[case] if isinstance(case, str) else case
    rng = np.random.default_rng([11, seed])
    owner = np.repeat(np.arange(len(widths)), widths)
    n = len(owner)
    offset = np.zeros(n)
    first = np.searchsorted(owner, np.asarray(electrodes, dtype=int))
    offset[first] = rng.uniform(0.5, 2.0, len(first))
    share = rng.uniform(0.2, 1.0, m)
    return LocalisationModel(
        derivatives=scale * rng.standard_normal((n, m, p)),
        nuisance=rng.standard_normal((n, n_nuisance)),
        offset=offset,
        candidate_of_channel=owner,
        spread=rng.uniform(0.01, 0.03, (m, 3)),
        share=share / share.sum(),
        region=np.arange(m) % 2,
    )


def bordered_errors(model, chosen):
    """e_j by the whole Bayesian problem: unknowns, nuisance and offset in one precision matrix, block inverted."""
    rows = np.flatnonzero(np.isin(model.candidate_of_channel, chosen))
    errors = []
    for j in range(len(model.share)):
        signals, p = model.derivatives[rows, j], model.derivatives.shape[2]
        parts = [signals, model.nuisance[rows]]
        prior = [1.0] * (p + model.nuisance.shape[1])
        if (model.offset[rows] != 0).any():
            parts.append(model.offset[rows][:, None])
            prior.append(0.0)
        whole = np.hstack(parts)
        covariance = np.linalg.inv(np.diag(prior) + whole.T @ whole)
        errors.append(np.sqrt((model.spread[j] ** 2 * np.diag(covariance)[:3]).sum()))
    return np.array(errors)


def bordered_score(model, chosen, kind):
    """Minus the rms or worst of `bordered_errors`."""
    errors = bordered_errors(model, chosen)
    return -np.sqrt(model.share @ errors**2) if kind == "rms" else -errors.max()
