"""The keys of [head] for a person's own surfaces and for a head's size."""

from __future__ import annotations

from typing import Annotated

from pydantic import AfterValidator, Field

from layout.brief.head_sizes import NAMED_SIZES
from layout.brief.schema_common import UNSET, Form, FromList, broken_rule, checked_text, one_of_words
from layout.units import MM

FileName = Annotated[str, checked_text(1000)]
UNITS = {"mm": MM, "m": 1.0}
Row = Annotated[tuple[float, ...], FromList, Field(min_length=4, max_length=4)]


def _known_size(name: str) -> str:
    if name not in NAMED_SIZES:
        raise broken_rule(f"must be one of the survey's sizes ({', '.join(NAMED_SIZES)})")
    return name


def _known_unit(unit: str) -> str:
    if unit not in UNITS:
        raise broken_rule(f"must be {one_of_words(tuple(UNITS))}")
    return unit


class OwnHeadForm(Form):
    """Part of [head]: the keys for kind = "surfaces", and the sizes for kind = "template"."""

    scalp: FileName = UNSET
    outer_skull: FileName = UNSET
    inner_skull: FileName = UNSET
    cortex: FileName = UNSET
    cortex_left: FileName = UNSET
    cortex_right: FileName = UNSET
    cortex_mask: FileName = UNSET
    cortex_mask_left: FileName = UNSET
    cortex_mask_right: FileName = UNSET
    landmarks: FileName = UNSET
    units: Annotated[str, AfterValidator(_known_unit)] = UNSET
    mni152_to_files: Annotated[tuple[Row, ...], FromList, Field(min_length=3, max_length=4)] = UNSET
    mni152_file: FileName = UNSET
    surface_vertices: Annotated[int, Field(ge=500, le=20_000)] = UNSET
    cortex_sources: Annotated[int, Field(ge=1000, le=200_000)] = UNSET
    least_gap_mm: Annotated[float, Field(ge=0.5, le=5)] = UNSET
    size: Annotated[str, AfterValidator(_known_size)] = UNSET
    length_mm: Annotated[float, Field(ge=150, le=230)] = UNSET
    breadth_mm: Annotated[float, Field(ge=110, le=190)] = UNSET
    circumference_mm: Annotated[float, Field(ge=440, le=680)] = UNSET


SIZE_KEYS = ("size", "length_mm", "breadth_mm", "circumference_mm")
SURFACE_KEYS = tuple(key for key in OwnHeadForm.model_fields if key not in SIZE_KEYS)


def check_own_head(form: OwnHeadForm, kind: str) -> None:
    """Raises the refusal of the first key that does not go with the kind of head or with the other keys."""
    given = [key for key in OwnHeadForm.model_fields if getattr(form, key) is not UNSET]
    for key in given:
        if key in SURFACE_KEYS and kind != "surfaces":
            raise broken_rule('must be left out unless head.kind is "surfaces"', key)
        if key in SIZE_KEYS and kind != "template":
            raise broken_rule('must be left out unless head.kind is "template"', key)
    if "size" in given and len(sizes := [key for key in SIZE_KEYS if key in given]) > 1:
        raise broken_rule("must be left out where head.size names a size", sizes[1])
    if kind == "surfaces":
        _check_surfaces(form, given)


def _check_surfaces(form: OwnHeadForm, given: list[str]) -> None:
    sides = ["cortex" in given, "cortex_left" in given, "cortex_right" in given]
    if sides not in ([True, False, False], [False, True, True]):
        keys = one_of_words(("cortex", "cortex_left and cortex_right"))
        named = ", ".join(key for key in given if key in _CORTEX) or "nothing"
        raise broken_rule(f"must name the cortex by {keys}", value=named)
    if "landmarks" not in given:
        raise broken_rule("must name a file with the landmarks NAS, LPA and RPA", "landmarks")
    for cortex in _CORTEX:
        mask = cortex.replace("cortex", "cortex_mask")
        if mask in given and cortex not in given:
            raise broken_rule(f"must be left out without head.{cortex}", mask)
    if "mni152_file" in given and "mni152_to_files" in given:
        raise broken_rule("must be left out where head.mni152_to_files is given", "mni152_file")


_CORTEX = ("cortex", "cortex_left", "cortex_right")
