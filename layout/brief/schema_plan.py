"""The TOML plan of `layout many` as pydantic models: strict, frozen, unknown keys forbidden."""

from __future__ import annotations

from typing import Annotated

from pydantic import AfterValidator, Field, model_validator

from layout.brief.objects_plan import DesignedFor
from layout.brief.schema_common import UNSET, Form, FromList, Name, Names, broken_rule, check_names_differ, checked_text
from layout.brief.schema_head import Conductivity, HeadForm
from layout.brief.schema_own_head import FileName

PLAN_SCHEMA_VERSION = 1
MOST_CELLS = 5000


def _without_repeats(values: tuple) -> tuple:
    for place, value in enumerate(values):
        if value in values[:place]:
            raise broken_rule("must not hold the same value twice", place)
    return values


def _listed(entry: object) -> object:
    """A list of 1 to 100 different values."""
    return Annotated[tuple[entry, ...], FromList, Field(min_length=1, max_length=100), AfterValidator(_without_repeats)]


Factors = _listed(Annotated[float, Field(ge=1e-3, le=1000)])
Layers = Annotated[tuple[Conductivity, ...], FromList, Field(min_length=3, max_length=4)]
LayerSets = _listed(Layers)
Counts = _listed(Annotated[int, Field(ge=1, le=10_000)])
Budgets = _listed(Annotated[float, Field(gt=0, le=1e12)])


class CrossForm(Form):
    """[cross]: the lists whose every combination is a cell; a list left out is as the brief has it."""

    heads: Annotated[Names, Field(min_length=1, max_length=100)] = UNSET
    skull_conductivity_factors: Factors = UNSET
    conductivities_s_per_m: LayerSets = UNSET
    counts: Counts = UNSET
    budgets: Budgets = UNSET
    noise_factors: Factors = UNSET
    sensor_noise_factors: Factors = UNSET
    background_factors: Factors = UNSET

    @model_validator(mode="after")
    def _check(self) -> CrossForm:
        for first, second in (("counts", "budgets"), ("skull_conductivity_factors", "conductivities_s_per_m")):
            if getattr(self, first) is not UNSET and getattr(self, second) is not UNSET:
                raise broken_rule(f"must be left out where there are {first}", second)
        cells = 1
        for key in type(self).model_fields:
            cells *= len(getattr(self, key) or (None,))
        if cells > MOST_CELLS:
            raise broken_rule(f"must make at most {MOST_CELLS} cells", value=cells)
        return self


class PlanHeadForm(HeadForm):
    """[[heads]]: a head in the keys of a brief's [head], under a name that [cross] uses."""

    name: Name


class PlanLayoutForm(Form):
    """[[layouts]]: a layout to judge in every cell."""

    name: Name
    designed_for: DesignedFor = UNSET
    table: FileName = UNSET
    sites: Annotated[Names, Field(min_length=1)] = UNSET

    @model_validator(mode="after")
    def _check(self) -> PlanLayoutForm:
        given = [key for key in ("designed_for", "table", "sites") if getattr(self, key) is not UNSET]
        if len(given) != 1:
            raise broken_rule("must have one of designed_for, table and sites", value=", ".join(given) or "none")
        return self


class PlanSearchForm(Form):
    """[search]: effort in place of the brief's."""

    starts: Annotated[int, Field(ge=1, le=1000)] = UNSET
    proof_parts: Annotated[int, Field(ge=0, le=10_000_000)] = UNSET


class PlanForm(Form):
    """The whole plan."""

    schema_version: Annotated[int, Field(alias="schema")]
    title: Annotated[str, checked_text(200)]
    brief: FileName
    cross: CrossForm = CrossForm()
    heads: Annotated[tuple[PlanHeadForm, ...], FromList, Field(min_length=1, max_length=100)] = UNSET
    layouts: Annotated[tuple[PlanLayoutForm, ...], FromList, Field(min_length=1, max_length=100)] = UNSET
    search: PlanSearchForm = PlanSearchForm()

    @model_validator(mode="after")
    def _check(self) -> PlanForm:
        check_names_differ(self.heads or (), "heads")
        check_names_differ(self.layouts or (), "layouts")
        return self
