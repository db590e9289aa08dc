"""Which candidates the brief insists on, and whether the rules leave room for everything."""

from __future__ import annotations

from itertools import combinations

import numpy as np

from layout.brief.objects import Brief
from layout.errors import BriefError
from layout.sensing.candidates import Candidates
from layout.sensing.existing import existing_singles, only_choice
from layout.sensing.names import named_singles, resolve_name


def kept_candidates(brief: Brief, candidates: Candidates) -> tuple[int, ...]:
    """The candidates that every layout must hold, in ascending order: places.keep, a named reference, and an existing
    layout that is to be extended.

    Raises BriefError where a name means several candidates, more are kept of an entry than its count, or two exclude
    each other; FileError for a damaged table of the existing layout.
    """
    kept: dict[int, str] = {}
    for name in brief.places.keep:
        here = named_singles(candidates, name, "places.keep")
        if len(here) > 1:
            raise BriefError(
                f"places.keep: must name sites that hold a single candidate, but {name!r} was given, "
                f"which holds {len(here)}"
            )
        kept.setdefault(_holder(candidates, int(here[0]), f"places.keep {name!r}"), f"places.keep {name!r}")
    reference = named_reference(brief, candidates)
    if reference is not None:
        kept.setdefault(reference, f"stock[{candidates.kind[reference]}].reference")
    if brief.existing is not None and brief.existing.use == "extend":
        for said, here in existing_singles(brief, candidates).items():
            kept.setdefault(_holder(candidates, only_choice(here, said), said), said)
    _check_counts(brief, candidates, kept)
    for clique in candidates.cliques:
        for first, second in combinations([number for number in kept if number in clique], 2):
            raise BriefError(f"{kept[second]}: must not exclude what else is kept, but it is too near to {kept[first]}")
    return tuple(sorted(kept))


def named_reference(brief: Brief, candidates: Candidates) -> int | None:
    """The candidate whose electrode the brief names as the reference, None where any may be.

    Of left-right pairs, the pair; given `candidates.singles`, the electrode itself. A site has its entry's name behind
    its own where another entry's place took the plain name. Raises BriefError for a name that is no site of the entry.
    """
    singles = candidates.singles
    for entry, stock in enumerate(brief.stock):
        if stock.kind == "electrode" and stock.reference != "any":
            own = np.flatnonzero(singles.kind == entry)
            names = [singles.sites.names[site].removesuffix(f"@{stock.name}") for site in singles.site[own]]
            key = f"stock[{entry}].reference"
            return _holder(candidates, int(own[names.index(resolve_name(stock.reference, names, key))]), key)
    return None


def _holder(candidates: Candidates, single: int, said: str) -> int:
    holder = candidates.holding(single)
    if holder is None:
        raise BriefError(
            f"{said}: must have a mirror image where places.left_right_pairs is true, but "
            f"{candidates.singles.names[single]!r} has none"
        )
    return holder


def _check_counts(brief: Brief, candidates: Candidates, kept: dict[int, str]) -> None:
    for entry, stock in enumerate(brief.stock):
        mine = [number for number in kept if candidates.kind[number] == entry]
        held = int(candidates.sensors[mine].sum()) if mine else 0
        if held > stock.count:
            key = "places.keep" if all(kept[one].startswith("places.keep") for one in mine) else "places.keep, existing"
            key = key if brief.existing is not None else "places.keep"
            raise BriefError(
                f"{key}: must keep at most {stock.count} sites of stock[{entry}] (its count, the reference "
                f"included), but {held} were given"
            )
