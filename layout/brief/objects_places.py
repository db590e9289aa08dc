"""Places of a brief: zones, rules about sites, and a layout that exists already."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Literal

# Parts of the scalp every head knows without being told; a brief may add its own under other names.
BUILT_IN_ZONES = ("eyes", "ears", "neck", "face", "forehead")


@dataclass(frozen=True)
class ZoneBrief:
    """A named part of the scalp and how many sensors it may hold.

    Exactly one of: all places within `radius` [m] (straight line) of any of the positions `around`; the polygon on the
    scalp with the given `corners`, in order, each a standard position or a point (3,) [m] in the head frame; the named
    sites `positions`. at_least and at_most count the sensors of the `kinds` (names of stock entries; empty: of all).
    """

    name: str
    around: tuple[str, ...] = ()
    radius: float | None = None
    corners: tuple[str | tuple[float, float, float], ...] = ()
    positions: tuple[str, ...] = ()
    at_least: int = 0
    at_most: int | None = None
    kinds: tuple[str, ...] = ()


@dataclass(frozen=True)
class PlacesBrief:
    """Zones, kept and forbidden sites (by site name), and the sizes [m] of the built-in keep-out zones.

    left_right_pairs: a site is chosen exactly if its mirror image is. ground: a site that is taken by an electrode
    which is not measured.
    """

    zones: tuple[ZoneBrief, ...] = ()
    keep: tuple[str, ...] = ()
    forbid: tuple[str, ...] = ()
    eye_radius: float = 25e-3
    ear_radius: float = 25e-3
    left_right_pairs: bool = False
    ground: str | None = None


@dataclass(frozen=True)
class ExistingBrief:
    """A layout that exists already, by the names of its sites or candidates, or as a table (absolute path).

    use: "extend" keeps all of it (the counts include it), "trim" chooses from it only.
    """

    use: Literal["extend", "trim"]
    sites: tuple[str, ...] = ()
    layout_tsv: Path | None = None
