"""[places] of the brief."""

from __future__ import annotations

from typing import Annotated, Any

from pydantic import BeforeValidator, Field, model_validator

from layout.brief.objects_places import BUILT_IN_ZONES
from layout.brief.schema_common import (
    UNSET,
    Form,
    FromList,
    Into,
    Name,
    Names,
    Radius,
    broken_rule,
    check_names_differ,
    is_number,
)
from layout.units import MM

_MOST_CORNERS = 100
_FARTHEST = 200  # mm from the origin that a corner may be


def _checked_corners(value: object) -> object:
    if not isinstance(value, list) or not 3 <= len(value) <= _MOST_CORNERS:
        raise broken_rule(f"must be a list of 3 to {_MOST_CORNERS} corners")
    corners: list[str | tuple[float, ...]] = []
    for i, corner in enumerate(value):
        if isinstance(corner, str):
            taken: str | tuple[float, ...] = corner
        elif isinstance(corner, list) and len(corner) == 3 and all(is_number(part) for part in corner):
            if max(abs(part) for part in corner) > _FARTHEST:
                raise broken_rule(f"must have coordinates of at most {_FARTHEST} mm", i)
            taken = tuple(float(part) for part in corner)
        else:
            raise broken_rule("must be a standard position in quotes or a point [x, y, z] in mm in the head frame", i)
        if taken in corners:
            raise broken_rule("must differ from the corners before it", i)
        corners.append(taken)
    return tuple(corners)


class ZoneForm(Form):
    """[[places.zones]]"""

    name: Name
    around: Annotated[Names, Field(min_length=1)] = UNSET
    radius_mm: Annotated[Radius, Into("radius", MM)] = UNSET
    corners: Annotated[Any, BeforeValidator(_checked_corners)] = UNSET
    positions: Annotated[Names, Field(min_length=1)] = UNSET
    at_least: Annotated[int, Field(ge=0, le=1024)] = UNSET
    at_most: Annotated[int, Field(ge=0, le=1024)] = UNSET
    kinds: Annotated[Names, Field(min_length=1)] = UNSET

    @model_validator(mode="after")
    def _check_where(self) -> ZoneForm:
        ways = [key for key in ("around", "corners", "positions") if getattr(self, key) is not UNSET]
        if len(ways) != 1:
            raise broken_rule("must give exactly one of around (with radius_mm), corners and positions")
        if self.around is not UNSET and self.radius_mm is UNSET:
            raise broken_rule("must be given where around is", "radius_mm")
        if self.around is UNSET and self.radius_mm is not UNSET:
            raise broken_rule("must be left out unless around is given", "radius_mm")
        return self

    @model_validator(mode="after")
    def _check_limits(self) -> ZoneForm:
        if self.at_most is not UNSET and (self.at_least or 0) > self.at_most:
            raise broken_rule(f"must be at most the zone's at_most of {self.at_most}", "at_least")
        if self.kinds is not UNSET and self.at_least is UNSET and self.at_most is UNSET:
            raise broken_rule("must be left out unless there is at_least or at_most", "kinds")
        return self


class PlacesForm(Form):
    """[places]"""

    zones: Annotated[tuple[ZoneForm, ...], FromList] = ()
    keep: Names = UNSET
    forbid: Names = UNSET
    eye_radius_mm: Annotated[Radius, Into("eye_radius", MM)] = UNSET
    ear_radius_mm: Annotated[Radius, Into("ear_radius", MM)] = UNSET
    left_right_pairs: bool = UNSET
    ground: Name = UNSET

    @model_validator(mode="after")
    def _check(self) -> PlacesForm:
        for i, zone in enumerate(self.zones):
            if zone.name in BUILT_IN_ZONES:
                raise broken_rule("must differ from the built-in zones", "zones", i, "name")
        check_names_differ(self.zones, "zones")
        both = [site for site in self.keep or () if site in (self.forbid or ())]
        if both:
            raise broken_rule("must not name a site that places.keep names too", "forbid", value=both[0])
        for key in ("keep", "forbid"):
            if self.ground in (getattr(self, key) or ()):
                raise broken_rule(f"must not be a site that places.{key} names", "ground")
        return self
