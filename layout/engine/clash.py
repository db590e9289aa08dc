"""Which rules clash when no set keeps them all."""

from __future__ import annotations

import numpy as np

from layout.engine.feasible import Feasible
from layout.engine.rows import FORBID, KEEP, integer_set


def rule_names(feasible: Feasible) -> tuple[str, ...]:
    """Every named family of rules: those of the rows, "keep" and "forbid" where there are any."""
    lists = [KEEP] * bool(feasible.keep) + [FORBID] * bool(feasible.forbid)
    return tuple(dict.fromkeys([*feasible.rows.names, *lists]))


def clashing_rules(feasible: Feasible, node_limit: int = 20_000) -> tuple[str, ...]:
    """A minimal set of named rules that cannot hold together; () where the rules allow a set.

    Rules of one name stand or fall together. Minimal: without any one of them the others allow a set. Found by the
    deletion filter (Chinneck and Dravnieks 1991, ORSA J. Computing 3:157; from memory), one integer programme for each
    name; the earlier of two names that could go is let go. What is not decided in `node_limit` nodes counts as allowed.
    Build the Feasible with checked=False, or plain contradictions raise before they can be asked about.
    """

    def clash(names: list[str]) -> bool:
        nothing = np.zeros(feasible.n_candidates)
        found, certain = integer_set(feasible, nothing, keeps=set(names).__contains__, node_limit=node_limit)
        return found is None and certain

    names = list(rule_names(feasible))
    if not clash(names):
        return ()
    for name in tuple(names):
        fewer = [one for one in names if one != name]
        if clash(fewer):
            names = fewer
    return tuple(names)
