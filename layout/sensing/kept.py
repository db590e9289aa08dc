"""Which candidates the brief insists on, and whether the rules leave room for everything."""

from __future__ import annotations

from itertools import combinations

import numpy as np

from layout.brief.objects import Brief
from layout.errors import BriefError
from layout.sensing.candidates import Candidates
from layout.sensing.lay_out import resolve_name


def kept_candidates(brief: Brief, candidates: Candidates) -> tuple[int, ...]:
    """The candidates that every layout must hold, in ascending order: places.keep and a named reference.

    Raises BriefError where a name means several candidates, more are kept of an entry than its count, or two exclude
    each other.
    """
    kept: dict[int, str] = {}
    for name in brief.places.keep:
        here = _at_site(candidates, resolve_name(name, candidates.sites.names, "places.keep"))
        if len(here) > 1:
            raise BriefError(
                f"places.keep: must name sites that hold a single candidate, but {name!r} was given, "
                f"which holds {len(here)}"
            )
        kept[int(here[0])] = f"places.keep {name!r}"
    reference = named_reference(brief, candidates)
    if reference is not None:
        kept.setdefault(reference, f"stock[{candidates.kind[reference]}].reference")
    _check_counts(brief, candidates, kept)
    for clique in candidates.cliques:
        for first, second in combinations([number for number in kept if number in clique], 2):
            raise BriefError(f"{kept[second]}: must not exclude what else is kept, but it is too near to {kept[first]}")
    return tuple(sorted(kept))


def named_reference(brief: Brief, candidates: Candidates) -> int | None:
    """The electrode that the brief names as the reference, None where any may be.

    A site has its entry's name behind its own where another entry's place took the plain name. Raises BriefError for a
    name that is no site of the entry.
    """
    for entry, stock in enumerate(brief.stock):
        if stock.kind == "electrode" and stock.reference != "any":
            own = np.flatnonzero(candidates.kind == entry)
            names = [candidates.sites.names[site].removesuffix(f"@{stock.name}") for site in candidates.site[own]]
            return int(own[names.index(resolve_name(stock.reference, names, f"stock[{entry}].reference"))])
    return None


def _at_site(candidates: Candidates, name: str) -> np.ndarray:
    return np.flatnonzero(candidates.site == candidates.sites.names.index(name))


def _check_counts(brief: Brief, candidates: Candidates, kept: dict[int, str]) -> None:
    for entry, stock in enumerate(brief.stock):
        held = [number for number in kept if candidates.kind[number] == entry]
        if len(held) > stock.count:
            raise BriefError(
                f"places.keep: must keep at most {stock.count} sites of stock[{entry}] (its count, the reference "
                f"included), but {len(held)} were given"
            )
