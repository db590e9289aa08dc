"""[budget] of the brief."""

from __future__ import annotations

from typing import Annotated

from pydantic import Field, model_validator

from layout.brief.schema_common import UNSET, Form, broken_rule


class BudgetForm(Form):
    """[budget]"""

    total: Annotated[float, Field(gt=0, le=1e12)]
    block_channels: Annotated[int, Field(ge=1, le=4096)] = UNSET
    block_price: Annotated[float, Field(ge=0, le=1e9)] = UNSET

    @model_validator(mode="after")
    def _check(self) -> BudgetForm:
        for key, other in (("block_channels", "block_price"), ("block_price", "block_channels")):
            if getattr(self, key) is UNSET and getattr(self, other) is not UNSET:
                raise broken_rule(f"must be given where {other} is", key)
        return self
