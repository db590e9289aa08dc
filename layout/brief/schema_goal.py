"""[goal] of the brief."""

from __future__ import annotations

from typing import Annotated

from pydantic import Field, model_validator

from layout.brief.objects_goal import ErrorOver, GoalKind
from layout.brief.schema_common import UNSET, Form, Into, Name, broken_rule
from layout.units import MM, PERCENT

Weight = Annotated[float, Field(ge=0, le=1e6)]
Error = Annotated[float, Field(gt=0, le=100)]


class GoalForm(Form):
    """[goal]"""

    kind: GoalKind = UNSET
    region_weights: Annotated[dict[Name, Weight], Field(min_length=1)] = UNSET
    error_over: ErrorOver = UNSET
    position_prior_mm: Annotated[float, Field(ge=0.1, le=1000), Into("position_prior", MM)] = UNSET
    moment_spread_percent: Annotated[float, Field(ge=0.1, le=10_000), Into("moment_spread", PERCENT)] = UNSET
    error_limits_mm: Annotated[dict[Name, Error], Field(min_length=1), Into("error_limits", MM)] = UNSET
    reach_bits: Annotated[float, Field(gt=0, le=1e6)] = UNSET
    reach_mm: Annotated[Error, Into("reach_error", MM)] = UNSET

    @property
    def has_target(self) -> bool:
        """Whether the smallest count that reaches a target is wanted."""
        return self.reach_bits is not UNSET or self.reach_mm is not UNSET

    @model_validator(mode="after")
    def _check(self) -> GoalForm:
        localisation = self.kind == "localisation"
        only_with = {
            "error_over": localisation,
            "reach_mm": localisation,
            "reach_bits": not localisation,
            "error_limits_mm": not localisation,
        }
        for key, fits in only_with.items():
            if getattr(self, key) is not UNSET and not fits:
                wanted = "localisation" if not localisation else "information"
                raise broken_rule(f'must be left out unless goal.kind is "{wanted}"', key)
        for key in ("position_prior_mm", "moment_spread_percent"):
            if getattr(self, key) is not UNSET and not localisation and self.error_limits_mm is UNSET:
                rule = 'must be left out unless goal.kind is "localisation" or there are error_limits_mm'
                raise broken_rule(rule, key)
        if self.region_weights is not UNSET and not any(self.region_weights.values()):
            raise broken_rule("must have at least one weight above 0", "region_weights")
        if self.error_limits_mm is not UNSET and self.has_target:
            raise broken_rule("must be left out where there are error_limits_mm", "reach_bits")
        return self
