"""What a name in the brief means among sites and candidates."""

from __future__ import annotations

import difflib

import numpy as np

from layout.anatomy.positions import canonical_name
from layout.errors import BriefError
from layout.sensing.candidates import Candidates


def near_names(name: str, known: list[str] | tuple[str, ...]) -> str:
    """The end of an error message: the known names that look like `name`, or nothing."""
    near = difflib.get_close_matches(name, dict.fromkeys(known), n=4, cutoff=0.4)
    return f"; near names: {', '.join(near)}" if near else ""


def resolve_name(name: str, names: list[str] | tuple[str, ...], key: str) -> str:
    """The site that a brief's `key` means by `name`: itself, or the present name of T3, T4, T5, T6.

    Raises BriefError, with near names, where there is no such site.
    """
    for candidate in (name, canonical_name(name)):
        if candidate in names:
            return candidate
    raise BriefError(f"{key}: must name a site of the stock, but {name!r} was given{near_names(name, names)}")


def site_in(name: str, names: list[str] | tuple[str, ...], key: str) -> str:
    """The site that the name of a site or of a candidate (site, space, axis) means; BriefError where there is none."""
    if name not in names:
        starts = [site for site in names if name.startswith(f"{site} ")]
        if starts:
            return max(starts, key=len)
    return resolve_name(name, names, key)


def named_singles(candidates: Candidates, name: str, key: str) -> np.ndarray:
    """Numbers of the single sensors that a name means: of a candidate itself, else all at the site of that name.

    A plain site's name is that of the electrode there where there is one. Raises BriefError where the name is neither,
    or no sensor may sit at the site.
    """
    singles = candidates.singles
    for one in (name, canonical_name(name)):
        if one in singles.names:
            return np.array([singles.names.index(one)])
    row = singles.sites.names.index(resolve_name(name, singles.sites.names, key))
    here = np.flatnonzero(singles.site == row)
    if len(here) == 0:
        raise BriefError(f"{key}: must name a site where a sensor may sit, but {name!r} was given")
    return here
