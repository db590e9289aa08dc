"""[existing] of the brief."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, model_validator

from layout.brief.schema_common import UNSET, Form, Names, broken_rule, checked_text


class ExistingForm(Form):
    """[existing]"""

    use: Literal["extend", "trim"]
    sites: Annotated[Names, Field(min_length=1)] = UNSET
    layout_tsv: Annotated[str, checked_text(1000)] = UNSET

    @model_validator(mode="after")
    def _check(self) -> ExistingForm:
        if (self.sites is UNSET) == (self.layout_tsv is UNSET):
            raise broken_rule("must give exactly one of sites and layout_tsv")
        return self
