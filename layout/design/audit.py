"""The arrays with which a stranger recomputes every value and bound."""

from __future__ import annotations

import numpy as np

from layout.design.objective import Objective
from layout.design.study import Study
from layout.engine.feasible import Feasible
from layout.engine.free_axes import FreeRanking
from layout.engine.ranking import Ranking

SCHEMA = 2


def audit_arrays(objective: Objective, feasible: Feasible, ranking: Ranking) -> dict[str, np.ndarray]:
    """Array name -> array: rows of every scenario, rules, layouts, and the weights that certify the bounds."""
    size = max(len(layout.chosen) for layout in ranking.layouts)
    chosen = np.full((len(ranking.layouts), size), -1)
    for row, layout in enumerate(ranking.layouts):
        chosen[row, : len(layout.chosen)] = layout.chosen
    return {
        **_rows(objective),
        **_rules(feasible),
        "chosen": chosen,
        "weights": ranking.root.weights,
        "values": np.array([objective.printed(layout.value) for layout in ranking.layouts]),
        "bounds": np.array([objective.printed(layout.bound) for layout in ranking.layouts]),
        "root_bound": np.array(objective.printed(ranking.root.value)),
        "rank_bound": np.array(np.nan if ranking.by_rank is None else ranking.by_rank.value),
        "rank_weights": np.zeros(0) if ranking.by_rank is None else ranking.by_rank.weights,
        "bound": np.array(objective.printed(ranking.layouts[0].bound)),
        "schema": np.array(SCHEMA),
        **_proofs(ranking),
    }


def free_audit_arrays(study: Study, objective: Objective, ranking: FreeRanking) -> dict[str, np.ndarray]:
    """The same for free axes: layouts with their axes as columns of frames, and the 3 x 3 blocks behind the bounds."""
    feasible, candidates, by_rank = study.feasible, study.candidates, ranking.by_rank
    return {
        **_rows(objective),
        **_rules(feasible),
        "free_axes": candidates.free_axes,
        "tilt_limit": candidates.tilt_limit,
        "chosen": np.array([layout.chosen for layout in ranking.layouts]),
        "frames": np.array([layout.frames for layout in ranking.layouts]),
        "values": np.array([layout.value for layout in ranking.layouts]),
        "bounds": np.array([layout.bound for layout in ranking.layouts]),
        "root_bound": np.array(ranking.root.limit),
        "root_candidates": ranking.root.candidates,
        "root_blocks": ranking.root.blocks,
        "rank_bound": np.array(np.nan if by_rank is None else by_rank.limit),
        "rank_candidates": np.zeros(0, dtype=int) if by_rank is None else by_rank.candidates,
        "rank_blocks": np.zeros((0, 3, 3)) if by_rank is None else by_rank.blocks,
        "bound": np.array(ranking.layouts[0].bound),
        "schema": np.array(SCHEMA),
    }


def _rules(feasible: Feasible) -> dict[str, np.ndarray]:
    """The rules: counts, exclusions, what must be chosen, weighted sums as a dense table, and the budget."""
    table = np.zeros((len(feasible.rules), feasible.n_candidates))
    for row, rule in zip(table, feasible.rules, strict=True):
        row[rule.members] = rule.weights
    rules = {
        "conflicts": np.argwhere(np.triu(feasible.conflicts)),
        "group": feasible.group,
        "counts": feasible.counts,
        "least": feasible.least,
        "sensors": feasible.sensors,
        "keep": np.array(feasible.keep, dtype=int),
        "clique_members": np.concatenate([*feasible.cliques, np.zeros(0, dtype=int)]).astype(int),
        "clique_starts": np.cumsum([0, *(len(clique) for clique in feasible.cliques)]),
        "rule_weights": table,
        "rule_low": np.array([rule.low for rule in feasible.rules]),
        "rule_high": np.array([rule.high for rule in feasible.rules]),
    }
    budget = feasible.budget
    if budget is not None:
        rules |= {
            "budget_price": budget.price,
            "budget_channels": budget.channels,
            "budget_total": np.array(budget.total),
            "budget_block": np.array([budget.block_size or 0, budget.block_price], dtype=float),
        }
    return rules


def _proofs(ranking: Ranking) -> dict[str, np.ndarray]:
    """The trees of branch and bound, `proof_0_` for the first rank and so on: see engine.branch_tree.ProofTree."""
    arrays = {}
    for rank, layout in enumerate(ranking.layouts):
        if layout.proof is not None:
            for name, value in vars(layout.proof.tree).items():
                arrays[f"proof_{rank}_{name}"] = np.asarray(value)
            arrays[f"proof_{rank}_bound"] = np.array(layout.proof.bound)
    return arrays


def _rows(objective: Objective) -> dict[str, np.ndarray]:
    """The brief's own scenario under plain names; every further one with its number behind the name."""
    arrays = {}
    for number, problem in enumerate(objective.problems):
        behind = f"_{number}" if number else ""
        arrays |= {
            f"target{behind}": problem.model.target,
            f"nuisance{behind}": problem.model.nuisance,
            f"offset{behind}": problem.model.offset,
        }
        if problem.localisation is not None:
            arrays |= {
                f"derivatives{behind}": problem.localisation.derivatives,
                f"spread{behind}": problem.localisation.spread,
                f"share{behind}": problem.localisation.share,
            }
    return arrays | {"candidate_of_channel": objective.problems[0].model.candidate_of_channel}
