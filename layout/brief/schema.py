"""The TOML brief as pydantic models: strict, frozen, unknown keys forbidden.

One line per key says its type, its allowed range, the field of `layout.brief.objects` it fills and its unit.
Defaults are not repeated here: a key left out is UNSET and the dataclass's own default holds.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise
from typing import Annotated, Literal

from pydantic import AfterValidator, BaseModel, BeforeValidator, ConfigDict, Field, model_validator
from pydantic_core import PydanticCustomError

from layout.brief.default_heads import DEFAULT_CORTEX_DEPTH, DEFAULT_RADII
from layout.brief.objects import BUILT_IN_ZONES, Axes, Family, Frame, Orientation, Side, SourceMesh
from layout.units import CM2, FT, FT_PER_CM, MM, NAM, UV

SCHEMA_VERSION = 1
UNSET = None  # TOML has no null, so None can only mean "left out of the file"


@dataclass(frozen=True)
class Into:
    """The dataclass field a key fills, and the SI size of the unit the key is written in."""

    field: str
    unit: float = 1.0


def broken_rule(rule: str, *key: str | int, value: object = None) -> PydanticCustomError:
    """A refusal in our own words: `rule` continues the key's name, `key` is relative to where it is raised.

    `value` replaces the value found in the file at that key, for rules about several keys.
    """
    return PydanticCustomError("rule", "{rule}", {"rule": rule, "key": key, "value": value})


def _tuple_from_list(value: object) -> object:
    return tuple(value) if isinstance(value, list) else value


def _checked_text(longest: int):
    def check(text: str) -> str:
        if not text.isprintable() or text != text.strip() or not 1 <= len(text) <= longest:
            raise broken_rule(f"must be a printable text of 1 to {longest} characters without spaces at its ends")
        return text

    return AfterValidator(check)


def _without_repeats(names: tuple[str, ...]) -> tuple[str, ...]:
    repeated = next((name for name in names if names.count(name) > 1), None)
    if repeated is not None:
        raise broken_rule("must not name the same thing twice", value=repeated)
    return names


def _check_names_differ(entries: tuple, *key: str) -> None:
    seen = set()
    for i, entry in enumerate(entries):
        if entry.name in seen:
            raise broken_rule("must differ from the names before it", *key, i, "name")
        seen.add(entry.name)


FromList = BeforeValidator(_tuple_from_list)
Name = Annotated[str, _checked_text(60)]
Names = Annotated[tuple[Name, ...], FromList, AfterValidator(_without_repeats)]
Coordinate = Annotated[float, Field(ge=-200, le=200)]
Radius = Annotated[float, Field(ge=1, le=150)]
Conductivity = Annotated[float, Field(ge=1e-5, le=100)]
HousingLength = Annotated[float, Field(ge=1, le=150)]
Frequency = Annotated[float, Field(gt=0, le=10_000)]
ContactNoise = Annotated[float, Field(ge=1e-3, le=1000)]
Count = Annotated[int, Field(ge=1, le=1024)]
Spacing = Annotated[float, Field(ge=0, le=200), Into("spacing", MM)]
Price = Annotated[float, Field(ge=0, le=1e9)]


class Form(BaseModel):
    """What every table of the brief shares."""

    model_config = ConfigDict(strict=True, frozen=True, extra="forbid", allow_inf_nan=False)


class HeadForm(Form):
    """[head]"""

    kind: Literal["template", "sphere"]
    layers: Annotated[int, Field(ge=3, le=4)] = UNSET
    conductivities_s_per_m: Annotated[tuple[Conductivity, ...], FromList, Field(min_length=3, max_length=4)] = UNSET
    source_mesh: SourceMesh = UNSET
    radii_mm: Annotated[tuple[Radius, ...], FromList, Field(min_length=3, max_length=4)] = UNSET
    cortex_depth_mm: Annotated[float, Field(gt=0)] = UNSET

    @property
    def n_layers(self) -> int:
        """Number of layers, said outright or by the length of a list; 3 when nothing says it."""
        return self.layers or len(self.conductivities_s_per_m or self.radii_mm or (0, 0, 0))

    @model_validator(mode="after")
    def _check(self) -> HeadForm:
        for key in ("radii_mm", "cortex_depth_mm"):
            if self.kind != "sphere" and getattr(self, key) is not UNSET:
                raise broken_rule('must be left out unless head.kind is "sphere"', key)
        for key in ("conductivities_s_per_m", "radii_mm"):
            values = getattr(self, key)
            if values is not UNSET and len(values) != self.n_layers:
                raise broken_rule(f"must have one value for each of the {self.n_layers} layers", key)
        radii = self.radii_mm or tuple(radius / MM for radius in DEFAULT_RADII[self.n_layers])
        if any(b <= a for a, b in pairwise(radii)):
            raise broken_rule("must be increasing from the brain outwards", "radii_mm")
        depth = DEFAULT_CORTEX_DEPTH / MM if self.cortex_depth_mm is UNSET else self.cortex_depth_mm
        if self.kind == "sphere" and depth >= radii[0]:
            left_out = f"left out: {DEFAULT_CORTEX_DEPTH / MM:g}"
            rule = f"must be less than the innermost radius of {radii[0]:g} mm ({left_out})"
            raise broken_rule(rule, "cortex_depth_mm", value=depth)
        return self


class RegionForm(Form):
    """[[regions]]"""

    name: Name
    centre_mm: Annotated[tuple[Coordinate, ...], FromList, Field(min_length=3, max_length=3), Into("centre", MM)]
    frame: Frame
    radius_mm: Annotated[Radius, Into("radius", MM)]
    side: Side
    moment_nam: Annotated[float, Field(ge=1e-3, le=1e4), Into("moment", NAM)]
    coherent: bool = UNSET
    orientation: Orientation = UNSET

    @model_validator(mode="after")
    def _check(self) -> RegionForm:
        x = self.centre_mm[0]
        if (self.side == "left" and x >= self.radius_mm) or (self.side == "right" and -x >= self.radius_mm):
            rule = f"must be a side that a ball of {self.radius_mm:g} mm at x = {x:g} mm reaches (left: x < 0)"
            raise broken_rule(rule, "side")
        if self.coherent and self.orientation == "free":
            raise broken_rule(
                'must be false where orientation is "free" (a coherent patch acts along its normals)',
                "coherent",
            )
        return self


class SitesForm(Form):
    """sites = { ... } of a stock entry."""

    family: Family = UNSET
    grid_mm: Annotated[float, Field(ge=2, le=100), Into("grid_pitch", MM)] = UNSET
    electrodes_tsv: Annotated[str, _checked_text(1000)] = UNSET
    slots_csv: Annotated[str, _checked_text(1000)] = UNSET

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


class MagnetometerForm(StockForm):
    """[[stock]] with kind = "magnetometer"."""

    kind: Literal["magnetometer"]
    noise_ft_per_rthz: Annotated[float, Field(ge=1e-2, le=1e6), Into("noise_density", FT)]
    axes: Axes = UNSET
    standoff_mm: Annotated[float, Field(ge=0, le=60), Into("standoff", MM)] = UNSET
    hair_mm: Annotated[float, Field(ge=0, le=60), Into("hair", MM)] = UNSET
    housing_mm: Annotated[
        tuple[HousingLength, ...], FromList, Field(min_length=3, max_length=3), Into("housing", MM)
    ] = UNSET


class ZoneForm(Form):
    """[[places.zones]]"""

    name: Name
    around: Annotated[Names, Field(min_length=1)]
    radius_mm: Annotated[Radius, Into("radius", MM)]


class PlacesForm(Form):
    """[places]"""

    zones: Annotated[tuple[ZoneForm, ...], FromList] = ()
    keep: Names = UNSET
    forbid: Names = UNSET
    eye_radius_mm: Annotated[Radius, Into("eye_radius", MM)] = UNSET
    ear_radius_mm: Annotated[Radius, Into("ear_radius", MM)] = UNSET

    @model_validator(mode="after")
    def _check(self) -> PlacesForm:
        for i, zone in enumerate(self.zones):
            if zone.name in BUILT_IN_ZONES:
                raise broken_rule("must differ from the built-in zones", "zones", i, "name")
        _check_names_differ(self.zones, "zones")
        both = [site for site in self.keep or () if site in (self.forbid or ())]
        if both:
            raise broken_rule("must not name a site that places.keep names too", "forbid", value=both[0])
        return self


class BackgroundForm(Form):
    """[noise.background]"""

    eeg_uv_rms: Annotated[float, Field(gt=0, le=1000), Into("eeg_rms", UV)] = UNSET
    patch_cm2: Annotated[float, Field(ge=0.01, le=200), Into("patch_area", CM2)] = UNSET
    include_regions: Annotated[bool, Into("regions_in_background")] = UNSET


class EyesForm(Form):
    """[noise.eyes]"""

    uv_rms: Annotated[float, Field(ge=0, le=10_000), Into("eyes_rms", UV)] = UNSET


class SurroundingsForm(Form):
    """[noise.surroundings]"""

    field_ft_rms: Annotated[float, Field(ge=0, le=1e9), Into("field_rms", FT)] = UNSET
    gradient_ft_per_cm_rms: Annotated[float, Field(ge=0, le=1e9), Into("gradient_rms", FT_PER_CM)] = UNSET


class NoiseForm(Form):
    """[noise]"""

    band_hz: Annotated[tuple[Frequency, ...], FromList, Field(min_length=2, max_length=2), Into("band")]
    averages: Annotated[int, Field(ge=1, le=1_000_000)] = UNSET
    background: BackgroundForm = BackgroundForm()
    eyes: EyesForm = EyesForm()
    surroundings: SurroundingsForm = SurroundingsForm()

    @model_validator(mode="after")
    def _check(self) -> NoiseForm:
        if self.band_hz[1] <= self.band_hz[0]:
            raise broken_rule("must be increasing, low edge first", "band_hz")
        return self


class GoalForm(Form):
    """[goal]"""

    kind: str = "information"

    @model_validator(mode="after")
    def _check(self) -> GoalForm:
        if self.kind == "localisation":
            raise broken_rule('must be "information" (localisation is not offered yet)', "kind")
        if self.kind != "information":
            raise broken_rule('must be "information"', "kind")
        return self


class SearchForm(Form):
    """[search]"""

    seed: Annotated[int, Field(ge=0, le=2**32 - 1)] = UNSET
    starts: Annotated[int, Field(ge=1, le=1000)] = UNSET
    ranked: Annotated[int, Field(ge=1, le=50)] = UNSET
    differ_by: Annotated[int, Field(ge=0)] = UNSET
    proof_parts: Annotated[int, Field(ge=0, le=10_000_000)] = UNSET
    time_allowance_s: Annotated[float, Field(gt=0, le=604_800), Into("time_allowance")] = UNSET


class BriefForm(Form):
    """The whole file."""

    schema_version: Annotated[int, Field(alias="schema")]  # compared with SCHEMA_VERSION before all else
    title: Annotated[str, _checked_text(200)]
    head: HeadForm
    regions: Annotated[tuple[RegionForm, ...], FromList, Field(min_length=1)]
    stock: Annotated[
        tuple[Annotated[ElectrodeForm | MagnetometerForm, Field(discriminator="kind")], ...],
        FromList,
        Field(min_length=1),
    ]
    places: PlacesForm = PlacesForm()
    noise: NoiseForm
    goal: GoalForm = GoalForm()
    search: SearchForm = SearchForm()

    @model_validator(mode="after")
    def _check(self) -> BriefForm:
        _check_names_differ(self.regions, "regions")
        _check_names_differ(self.stock, "stock")
        self._check_zone_names()
        self._check_references()
        self._check_counts()
        return self

    def _check_zone_names(self) -> None:
        known = (*BUILT_IN_ZONES, *(zone.name for zone in self.places.zones))
        for i, entry in enumerate(self.stock):
            for key in ("keep_out", "only_in", "contact_noise_in_uv"):
                for zone in getattr(entry, key, UNSET) or ():
                    if zone not in known:
                        rule = f"must name known zones ({', '.join(known)})"
                        raise broken_rule(rule, "stock", i, key, value=zone)

    def _check_references(self) -> None:
        named = [
            (i, entry.named_reference)
            for i, entry in enumerate(self.stock)
            if isinstance(entry, ElectrodeForm) and entry.named_reference is not None
        ]
        for i, site in named[1:]:
            rule = 'must be "any" (all electrodes share one reference, and an earlier entry names it)'
            raise broken_rule(rule, "stock", i, "reference", value=site)
        for i, site in named:
            if site in (self.places.forbid or ()):
                raise broken_rule("must not be a site that places.forbid names", "stock", i, "reference")

    def _check_counts(self) -> None:
        electrodes = [i for i, entry in enumerate(self.stock) if isinstance(entry, ElectrodeForm)]
        if electrodes and sum(self.stock[i].count for i in electrodes) < 2:
            raise broken_rule("must be at least 2 (one electrode is the reference)", "stock", electrodes[0], "count")
        total = sum(entry.count for entry in self.stock)
        if (self.search.differ_by or 0) > total:
            raise broken_rule(f"must be at most {total}, the number of sensors in stock", "search", "differ_by")
        if len(self.places.keep or ()) > total:
            rule = f"must name at most {total} sites, the number of sensors in stock"
            raise broken_rule(rule, "places", "keep", value=len(self.places.keep))
