"""The footprint of a sensor as the brief writes it."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import BeforeValidator, Field, model_validator

from layout.brief.schema_common import UNSET, Form, broken_rule

Length = Annotated[float, Field(ge=1, le=150)]

# The keys that each shape needs, and those it may have besides.
_KEYS = {"circle": ({"diameter_mm"}, set()), "rectangle": ({"width_mm", "depth_mm"}, {"turn_deg"}), "housing": ((), ())}


class FootprintForm(Form):
    """footprint = { ... } of a stock entry; "housing" stands for the face of its housing."""

    shape: Literal["circle", "rectangle", "housing"]
    diameter_mm: Length = UNSET
    width_mm: Length = UNSET
    depth_mm: Length = UNSET
    turn_deg: Annotated[float, Field(ge=-180, le=180)] = UNSET

    @model_validator(mode="after")
    def _check(self) -> FootprintForm:
        needed, possible = _KEYS[self.shape]
        for key in ("diameter_mm", "width_mm", "depth_mm", "turn_deg"):
            given = getattr(self, key) is not UNSET
            if key in needed and not given:
                raise broken_rule(f'must be given where shape is "{self.shape}"', key)
            if given and key not in needed and key not in possible:
                raise broken_rule(f'must be left out where shape is "{self.shape}"', key)
        return self


def _table_from_word(value: object) -> object:
    if isinstance(value, str):
        if value != "housing":
            raise broken_rule('must be "housing" or a table such as { shape = "circle", diameter_mm = 12 }')
        return {"shape": value}
    return value


Footprint = Annotated[FootprintForm, BeforeValidator(_table_from_word)]
