"""The TOML brief as pydantic models: strict, frozen, unknown keys forbidden.

One line per key says its type, its allowed range, the field of `layout.brief.objects` it fills and its unit.
Defaults are not repeated here: a key left out is UNSET and the dataclass's own default holds. Each table has its own
module schema_*.py; the rules that join several tables are in cross_rules.py.
"""

from __future__ import annotations

from typing import Annotated

from pydantic import Field, model_validator

from layout.brief.cross_rules import check_across_tables
from layout.brief.schema_budget import BudgetForm
from layout.brief.schema_common import UNSET, Form, FromList, check_names_differ, checked_text
from layout.brief.schema_existing import ExistingForm
from layout.brief.schema_goal import GoalForm
from layout.brief.schema_gradiometer import GradiometerForm
from layout.brief.schema_head import HeadForm
from layout.brief.schema_noise import NoiseForm
from layout.brief.schema_places import PlacesForm
from layout.brief.schema_regions import RegionForm
from layout.brief.schema_scenarios import ScenariosForm
from layout.brief.schema_search import SearchForm
from layout.brief.schema_stock import ElectrodeForm, MagnetometerForm

SCHEMA_VERSION = 1


class BriefForm(Form):
    """The whole file."""

    schema_version: Annotated[int, Field(alias="schema")]  # compared with SCHEMA_VERSION before all else
    title: Annotated[str, checked_text(200)]
    head: HeadForm
    regions: Annotated[tuple[RegionForm, ...], FromList, Field(min_length=1)]
    stock: Annotated[
        tuple[Annotated[ElectrodeForm | MagnetometerForm | GradiometerForm, Field(discriminator="kind")], ...],
        FromList,
        Field(min_length=1),
    ]
    places: PlacesForm = PlacesForm()
    noise: NoiseForm
    goal: GoalForm = GoalForm()
    scenarios: ScenariosForm = ScenariosForm()
    budget: BudgetForm = UNSET
    existing: ExistingForm = UNSET
    search: SearchForm = SearchForm()

    @model_validator(mode="after")
    def _check(self) -> BriefForm:
        check_names_differ(self.regions, "regions")
        check_names_differ(self.stock, "stock")
        check_across_tables(self)
        return self
