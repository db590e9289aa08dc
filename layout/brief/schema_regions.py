"""[[regions]] of the brief."""

from __future__ import annotations

from typing import Annotated

from pydantic import BeforeValidator, Field, model_validator

from layout.brief.objects import Frame, Orientation, Side
from layout.brief.schema_common import UNSET, Form, FromList, Into, Name, Radius, broken_rule, checked_text
from layout.units import MM, NAM

Coordinate = Annotated[float, Field(ge=-200, le=200)]
FileName = Annotated[str, checked_text(1000)]
VertexNumber = Annotated[int, Field(ge=0, le=10_000_000)]
REGION_FILES = ("label_file", "mask_nifti", "vertices_file")
# The ways to say which cortex is meant, and the keys that go with each: those it needs, those it may have.
PLACES = {
    "centre_mm": (("frame", "radius_mm"), ("along_cortex",)),
    "label_file": (("label",), ()),
    "mask_nifti": (("frame",), ("label",)),
    "vertices_file": ((), ()),
    "vertices": ((), ()),
    "parcel": ((), ()),
}


def _label(value: object) -> object:
    if type(value) not in (str, int):
        raise broken_rule("must be a label's name in quotes or its whole number")
    return value


class RegionForm(Form):
    """[[regions]]"""

    name: Name
    centre_mm: Annotated[tuple[Coordinate, ...], FromList, Field(min_length=3, max_length=3), Into("centre", MM)] = (
        UNSET
    )
    frame: Frame = UNSET
    radius_mm: Annotated[Radius, Into("radius", MM)] = UNSET
    along_cortex: bool = UNSET
    label_file: FileName = UNSET
    label: Annotated[str | int, BeforeValidator(_label)] = UNSET
    mask_nifti: FileName = UNSET
    vertices_file: FileName = UNSET
    vertices: Annotated[tuple[VertexNumber, ...], FromList, Field(min_length=1, max_length=100_000)] = UNSET
    parcel: Name = UNSET
    side: Side
    moment_nam: Annotated[float, Field(ge=1e-3, le=1e4), Into("moment", NAM)]
    coherent: bool = UNSET
    orientation: Orientation = UNSET

    @model_validator(mode="after")
    def _check(self) -> RegionForm:
        self._check_place()
        if self.centre_mm is not UNSET:
            self._check_ball()
        if self.coherent and self.orientation == "free":
            raise broken_rule(
                'must be false where orientation is "free" (a coherent patch acts along its normals)',
                "coherent",
            )
        return self

    def _check_place(self) -> None:
        named = [key for key in PLACES if getattr(self, key) is not UNSET]
        if not named:
            raise broken_rule(f"must be given (or one of {', '.join(list(PLACES)[1:])})", "centre_mm")
        if len(named) > 1:
            raise broken_rule(f"must be left out where {named[0]} says which cortex is meant", named[1])
        needed, allowed = PLACES[named[0]]
        for key in needed:
            if getattr(self, key) is UNSET:
                raise broken_rule(f"must be given with {named[0]}", key)
        for key in ("frame", "radius_mm", "along_cortex", "label"):
            if getattr(self, key) is not UNSET and key not in (*needed, *allowed):
                raise broken_rule(f"must be left out with {named[0]}", key)

    def _check_ball(self) -> None:
        x = self.centre_mm[0]
        if (self.side == "left" and x >= self.radius_mm) or (self.side == "right" and -x >= self.radius_mm):
            rule = f"must be a side that a ball of {self.radius_mm:g} mm at x = {x:g} mm reaches (left: x < 0)"
            if self.frame != "files":  # whose x may run either way
                raise broken_rule(rule, "side")
