"""[scenarios] of the brief."""

from __future__ import annotations

from typing import Annotated

from pydantic import AfterValidator, Field, model_validator

from layout.brief.head_sizes import NAMED_SIZES
from layout.brief.objects_goal import Judge
from layout.brief.schema_common import UNSET, Form, FromList, Into, broken_rule
from layout.brief.schema_head import Conductivity
from layout.units import DEGREE, MM


def _without_repeats(entries: tuple) -> tuple:
    for i, entry in enumerate(entries):
        if entry in entries[:i]:
            raise broken_rule("must not hold the same scenario twice", i)
    return entries


def _without_one(factors: tuple[float, ...]) -> tuple[float, ...]:
    if 1.0 in factors:
        rule = "must not be 1 (the brief's own noise is always the first scenario)"
        raise broken_rule(rule, factors.index(1.0))
    return factors


Layers = Annotated[tuple[Conductivity, ...], FromList, Field(min_length=3, max_length=4)]


def _known_size(name: str) -> str:
    if name not in NAMED_SIZES:
        raise broken_rule(f"must be a size of the survey ({', '.join(NAMED_SIZES)})")
    return name


SizeName = Annotated[str, AfterValidator(_known_size)]
SizeNames = Annotated[
    tuple[SizeName, ...], FromList, Field(min_length=1, max_length=10), AfterValidator(_without_repeats)
]
Factor = Annotated[float, Field(ge=1e-3, le=1000)]
Factors = Annotated[
    tuple[Factor, ...],
    FromList,
    Field(min_length=1, max_length=20),
    AfterValidator(_without_repeats),
    AfterValidator(_without_one),
]


class ScenariosForm(Form):
    """[scenarios]"""

    judge: Judge = UNSET
    conductivities_s_per_m: Annotated[
        tuple[Layers, ...],
        FromList,
        Field(min_length=1, max_length=20),
        AfterValidator(_without_repeats),
        Into("conductivities"),
    ] = UNSET
    heads: SizeNames = UNSET
    noise_factors: Factors = UNSET
    sensor_noise_factors: Factors = UNSET
    background_factors: Factors = UNSET
    pose_error_mm: Annotated[float, Field(gt=0, le=30), Into("pose_error", MM)] = UNSET
    pose_error_degrees: Annotated[float, Field(gt=0, le=45), Into("pose_tilt", DEGREE)] = UNSET
    pose_draws: Annotated[int, Field(ge=1, le=100)] = UNSET
    any_one_lost: bool = UNSET

    @model_validator(mode="after")
    def _check(self) -> ScenariosForm:
        if self.pose_draws is not UNSET and self.pose_error_mm is UNSET and self.pose_error_degrees is UNSET:
            raise broken_rule("must be left out unless there is pose_error_mm or pose_error_degrees", "pose_draws")
        return self
