"""[[stock]] of the brief."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, model_validator

from layout.brief.objects_stock import Family, MagnetometerBrief
from layout.brief.schema_axes import AxesValue
from layout.brief.schema_common import UNSET, Form, FromList, Into, Name, Names, broken_rule, checked_text
from layout.brief.schema_footprint import Footprint
from layout.units import DEGREE, FT, MM, UV

HousingLength = Annotated[float, Field(ge=1, le=150)]
CellLength = Annotated[float, Field(ge=0, le=50)]
ContactNoise = Annotated[float, Field(ge=1e-3, le=1000)]
Count = Annotated[int, Field(ge=1, le=1024)]
Spacing = Annotated[float, Field(ge=0, le=200), Into("spacing", MM)]
Price = Annotated[float, Field(ge=0, le=1e9)]
SLACK = 1e-9  # [mm] rounding of what is to fit into a housing


class SitesForm(Form):
    """sites = { ... } of a stock entry."""

    family: Family = UNSET
    grid_mm: Annotated[float, Field(ge=2, le=100), Into("grid_pitch", MM)] = UNSET
    electrodes_tsv: Annotated[str, checked_text(1000)] = UNSET
    slots_csv: Annotated[str, checked_text(1000)] = UNSET

    @model_validator(mode="after")
    def _check(self) -> SitesForm:
        if len(self.model_fields_set) != 1:
            raise broken_rule("must name exactly one of family, grid_mm, electrodes_tsv and slots_csv")
        return self


class StockForm(Form):
    """The keys of [[stock]] that every kind of sensor has."""

    name: Name
    count: Count
    sites: SitesForm
    spacing_mm: Spacing = UNSET
    price: Price = UNSET
    keep_out: Names = UNSET
    only_in: Names = UNSET
    count_at_least: Annotated[int, Field(ge=0, le=1024)] = UNSET
    price_per_channel: Price = UNSET
    footprint: Footprint = UNSET
    clearance_mm: Annotated[float, Field(ge=0, le=100), Into("clearance", MM)] = UNSET
    gain_error_percent: Annotated[float, Field(ge=0, le=50), Into("gain_error", 0.01)] = UNSET
    crosstalk_percent: Annotated[float, Field(ge=0, le=50), Into("crosstalk", 0.01)] = UNSET

    @model_validator(mode="after")
    def _check_count_at_least(self) -> StockForm:
        if (self.count_at_least or 0) > self.count:
            raise broken_rule(f"must be at most the count of {self.count}", "count_at_least")
        return self

    @model_validator(mode="after")
    def _check_footprint(self) -> StockForm:
        if self.clearance_mm is not UNSET and self.footprint is UNSET:
            raise broken_rule("must be left out unless there is a footprint", "clearance_mm")
        return self

    @model_validator(mode="after")
    def _check_zones(self) -> StockForm:
        both = [zone for zone in self.only_in or () if zone in (self.keep_out or ())]
        if both:
            raise broken_rule("must not name a zone that keep_out names too", "only_in", value=both[0])
        return self


class ElectrodeForm(StockForm):
    """[[stock]] with kind = "electrode"."""

    kind: Literal["electrode"]
    contact_noise_uv: Annotated[ContactNoise, Into("contact_noise", UV)]
    contact_noise_in_uv: Annotated[dict[str, ContactNoise], Into("contact_noise_in", UV)] = UNSET
    reference: Name = UNSET
    disc_mm: Annotated[float, Field(gt=0, le=40), Into("disc_diameter", MM)] = UNSET

    @property
    def named_reference(self) -> str | None:
        """The site that must carry the reference, None where any may."""
        return None if self.reference in (UNSET, "any") else self.reference

    @model_validator(mode="after")
    def _check_sites(self) -> ElectrodeForm:
        if self.sites.slots_csv is not UNSET:
            raise broken_rule(
                "must be left out for electrodes (helmet slots carry magnetometers)", "sites", "slots_csv"
            )
        return self

    @model_validator(mode="after")
    def _check_no_housing(self) -> ElectrodeForm:
        if self.footprint is not UNSET and self.footprint.shape == "housing":
            rule = 'must be a "circle" or a "rectangle" for electrodes (they have no housing)'
            raise broken_rule(rule, "footprint")
        return self


class HousedForm(StockForm):
    """The keys of every kind of sensor that sits in a housing."""

    standoff_mm: Annotated[float, Field(ge=0, le=60), Into("standoff", MM)] = UNSET
    hair_mm: Annotated[float, Field(ge=0, le=60), Into("hair", MM)] = UNSET
    housing_mm: Annotated[
        tuple[HousingLength, ...], FromList, Field(min_length=3, max_length=3), Into("housing", MM)
    ] = UNSET
    cell_mm: Annotated[tuple[CellLength, ...], FromList, Field(min_length=3, max_length=3), Into("cell", MM)] = UNSET
    coil_mm: Annotated[float, Field(gt=0, le=50), Into("coil_diameter", MM)] = UNSET

    @model_validator(mode="after")
    def _check_cell(self) -> HousedForm:
        if self.cell_mm is not UNSET and self.coil_mm is not UNSET:
            raise broken_rule("must be left out where cell_mm is given (a sensor has one or the other)", "coil_mm")
        if self.cell_mm is not UNSET and min(self.cell_mm[:2]) == 0:
            raise broken_rule("must have a width and a depth greater than 0 (its length may be 0)", "cell_mm")
        return self

    def check_inside(self, key: str, along: float, across: float, baseline: tuple[float, float] = (0.0, 0.0)) -> None:
        """Refuses `key` if what measures does not fit into the housing.

        along, across [mm]: how far it reaches along the housing and to both sides together; baseline [mm]: of a
        gradiometer, along and across.
        """
        width, depth, length = self.housing_mm or tuple(edge / MM for edge in MagnetometerBrief.housing)
        standoff = MagnetometerBrief.standoff / MM if self.standoff_mm is UNSET else self.standoff_mm
        inside = standoff - along / 2 >= -SLACK and standoff + baseline[0] + along / 2 <= length + SLACK
        if not inside or baseline[1] + across > min(width, depth) + SLACK:
            raise broken_rule(
                f"must fit into the housing_mm of {width:g} x {depth:g} x {length:g}, its centre (of an axial "
                f"gradiometer that of the near coil) {standoff:g} mm above the face",
                key,
            )


class MagnetometerForm(HousedForm):
    """[[stock]] with kind = "magnetometer"."""

    kind: Literal["magnetometer"]
    noise_ft_per_rthz: Annotated[float, Field(ge=1e-2, le=1e6), Into("noise_density", FT)]
    axes: AxesValue = UNSET
    tilt_limit_deg: Annotated[float, Field(gt=0, le=90), Into("tilt_limit", DEGREE)] = UNSET

    @property
    def is_free(self) -> bool:
        """Whether axes may point anywhere."""
        return self.axes in ("free", "free_two")

    @model_validator(mode="after")
    def _check_tilt_limit(self) -> MagnetometerForm:
        if self.tilt_limit_deg is not UNSET and self.axes != "free":
            raise broken_rule('must be left out unless axes is "free"', "tilt_limit_deg")
        return self

    @model_validator(mode="after")
    def _check_extent(self) -> MagnetometerForm:
        if self.cell_mm is not UNSET:
            if self.cell_mm[2] == 0 and self.axes not in (UNSET, "normal"):
                raise broken_rule('must have a length greater than 0 unless axes is "normal" (a flat coil)', "cell_mm")
            self.check_inside("cell_mm", self.cell_mm[2], max(self.cell_mm[:2]))
        if self.coil_mm is not UNSET:
            if self.is_free:
                raise broken_rule(
                    "must be left out where axes are free (a coil turns with its axis; cell_mm may do)", "coil_mm"
                )
            upright = self.axes in (UNSET, "normal")
            self.check_inside("coil_mm", 0.0 if upright else self.coil_mm, self.coil_mm)
        return self
