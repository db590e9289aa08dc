"""[search] of the brief."""

from __future__ import annotations

from typing import Annotated

from pydantic import Field, model_validator

from layout.brief.objects_goal import SearchBrief
from layout.brief.schema_common import UNSET, Form, Into, broken_rule


class SearchForm(Form):
    """[search]"""

    seed: Annotated[int, Field(ge=0, le=2**32 - 1)] = UNSET
    starts: Annotated[int, Field(ge=1, le=1000)] = UNSET
    ranked: Annotated[int, Field(ge=1, le=50)] = UNSET
    differ_by: Annotated[int, Field(ge=0)] = UNSET
    proof_parts: Annotated[int, Field(ge=0, le=10_000_000)] = UNSET
    proof_ranks: Annotated[int, Field(ge=1, le=50)] = UNSET
    polish: bool = UNSET
    time_allowance_s: Annotated[float, Field(gt=0, le=604_800), Into("time_allowance")] = UNSET

    @model_validator(mode="after")
    def _check(self) -> SearchForm:
        ranked = self.ranked or SearchBrief.ranked
        if (self.proof_ranks or 1) > ranked:
            raise broken_rule(f"must be at most {ranked}, the number of ranked layouts (search.ranked)", "proof_ranks")
        return self
