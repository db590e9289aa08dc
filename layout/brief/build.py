"""From the checked form to the frozen objects, in SI units."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

from layout.brief import objects
from layout.brief.build_own_head import head_size_brief, own_surfaces
from layout.brief.default_heads import DEFAULT_CONDUCTIVITIES, DEFAULT_CORTEX_DEPTH, DEFAULT_RADII
from layout.brief.schema import BriefForm
from layout.brief.schema_common import UNSET, Form, Into
from layout.brief.schema_existing import ExistingForm
from layout.brief.schema_footprint import FootprintForm
from layout.brief.schema_gradiometer import GradiometerForm
from layout.brief.schema_head import HeadForm
from layout.brief.schema_noise import NoiseForm
from layout.brief.schema_places import PlacesForm, ZoneForm
from layout.brief.schema_recording import RecordingForm
from layout.brief.schema_regions import REGION_FILES, RegionForm
from layout.brief.schema_stock import ElectrodeForm, MagnetometerForm
from layout.units import DEGREE, MM


def build_brief(form: BriefForm, sha256: str, folder: Path) -> objects.Brief:
    """Everything the form says, with the defaults of `layout.brief.objects` where it says nothing."""
    return objects.Brief(
        title=form.title,
        head=head_brief(form.head, folder),
        regions=tuple(_region(region, folder) for region in form.regions),
        stock=tuple(_stock(entry, folder) for entry in form.stock),
        places=_places(form.places),
        noise=_noise(form.noise, folder),
        goal=objects.GoalBrief(**_said(form.goal)),
        search=objects.SearchBrief(**_said(form.search)),
        sha256=sha256,
        folder=folder,
        scenarios=objects.ScenariosBrief(**_said(form.scenarios)),
        budget=None if form.budget is UNSET else objects.BudgetBrief(**_said(form.budget)),
        existing=None if form.existing is UNSET else _existing(form.existing, folder),
    )


def _said(form: Form) -> dict[str, object]:
    """Fields and SI values of the keys the file gives; tables inside are left to the caller."""
    said = {}
    for key in form.model_fields_set:
        value = getattr(form, key)
        if isinstance(value, Form):
            continue
        metadata = type(form).model_fields[key].metadata
        into = next((m for m in metadata if isinstance(m, Into)), Into(key))
        said[into.field] = value if into.unit == 1.0 else _in_si(value, into.unit)
    return said


def _in_si(value: float | tuple | dict, unit: float) -> float | tuple | dict:
    """The value times the unit, as the double nearest to the decimal: 15 µV is 15e-6 V to the last digit.

    So a default written out gives the same bytes of results as a default left out.
    """
    if isinstance(value, tuple):
        return tuple(_in_si(v, unit) for v in value)
    if isinstance(value, dict):
        return {key: _in_si(v, unit) for key, v in value.items()}
    return float(f"{value * unit:.15g}")


def head_brief(form: HeadForm, folder: Path) -> objects.HeadBrief:
    """What [head] says."""
    sphere = {}
    if form.kind == "sphere":
        radii, depth = form.radii_mm, form.cortex_depth_mm
        sphere["radii"] = DEFAULT_RADII[form.n_layers] if radii is UNSET else _in_si(radii, MM)
        sphere["cortex_depth"] = DEFAULT_CORTEX_DEPTH if depth is UNSET else _in_si(depth, MM)
    mesh = {} if form.source_mesh is UNSET else {"source_mesh": form.source_mesh}
    conductivities = form.conductivities_s_per_m or DEFAULT_CONDUCTIVITIES[form.n_layers]
    own = {"surfaces": own_surfaces(form, folder)} if form.kind == "surfaces" else {}
    if form.lead_field_file is not UNSET:
        own["lead_field_file"] = folder / form.lead_field_file
    if form.nodes is not UNSET:
        own["nodes"] = form.nodes
    return objects.HeadBrief(
        kind=form.kind,
        conductivities=conductivities,
        size=head_size_brief(form),
        model=form.chosen_model,
        **mesh,
        **sphere,
        **own,
    )


def _region(form: RegionForm, folder: Path) -> objects.RegionBrief:
    said = {"centre": None, "frame": "head", "radius": None} | _said(form)
    files = {key: folder / said[key] for key in REGION_FILES if key in said}
    return objects.RegionBrief(**(said | files))


def _stock(form: ElectrodeForm | MagnetometerForm | GradiometerForm, folder: Path) -> objects.StockBrief:
    kinds = {
        "electrode": objects.ElectrodeBrief,
        "magnetometer": objects.MagnetometerBrief,
        "gradiometer": objects.GradiometerBrief,
    }
    sites = {
        key: folder / value if key in ("electrodes_tsv", "slots_csv") else value
        for key, value in _said(form.sites).items()
    }
    said = _said(form)
    if form.kind == "gradiometer":
        said = _noise_of_difference(said)
    entry = kinds[form.kind](sites=objects.SitesBrief(**sites), **said)
    return entry if form.footprint is UNSET else replace(entry, footprint=_footprint(form.footprint, entry))


def _noise_of_difference(said: dict[str, object]) -> dict[str, object]:
    """A gradiometer's noise stated over its baseline, or for each of two coils that are noisy apart, as that of the
    difference [T/sqrt(Hz)].
    """
    said = dict(said)
    if "noise_over_baseline" in said:
        said["noise_density"] = said.pop("noise_over_baseline") * said["baseline"]
    if "coil_noise" in said:
        said["noise_density"] = said.pop("coil_noise") * 2**0.5
    return said


def _footprint(form: FootprintForm, entry: objects.StockBrief) -> objects.FootprintBrief:
    if form.shape == "housing":
        return objects.FootprintBrief("rectangle", *entry.housing[:2])
    if form.shape == "circle":
        diameter = _in_si(form.diameter_mm, MM)
        return objects.FootprintBrief("circle", diameter, diameter)
    turn = {} if form.turn_deg is UNSET else {"turn": _in_si(form.turn_deg, DEGREE)}
    return objects.FootprintBrief("rectangle", _in_si(form.width_mm, MM), _in_si(form.depth_mm, MM), **turn)


def _places(form: PlacesForm) -> objects.PlacesBrief:
    zones = tuple(_zone(zone) for zone in form.zones)
    return objects.PlacesBrief(**{**_said(form), "zones": zones})


def _zone(form: ZoneForm) -> objects.ZoneBrief:
    said = _said(form)
    if form.corners is not UNSET:
        said["corners"] = tuple(one if isinstance(one, str) else _in_si(one, MM) for one in form.corners)
    return objects.ZoneBrief(**said)


def _existing(form: ExistingForm, folder: Path) -> objects.ExistingBrief:
    said = _said(form)
    if form.layout_tsv is not UNSET:
        said["layout_tsv"] = folder / form.layout_tsv
    return objects.ExistingBrief(**said)


def _noise(form: NoiseForm, folder: Path) -> objects.NoiseBrief:
    parts = (form, form.background, form.eyes, form.surroundings)
    said = {field: value for part in parts for field, value in _said(part).items()}
    recording = None if form.recording is UNSET else _recording(form.recording, folder)
    return objects.NoiseBrief(**said, recording=recording)


def _recording(form: RecordingForm, folder: Path) -> objects.RecordingBrief:
    said = _said(form)
    files = {key: folder / said[key] for key in ("file", "electrodes_tsv") if key in said}
    return objects.RecordingBrief(**(said | files))
