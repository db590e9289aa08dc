"""From the checked form to the frozen objects, in SI units."""

from __future__ import annotations

from pathlib import Path

from layout.brief import objects, schema
from layout.brief.default_heads import DEFAULT_CONDUCTIVITIES, DEFAULT_CORTEX_DEPTH, DEFAULT_RADII
from layout.units import MM


def build_brief(form: schema.BriefForm, sha256: str, folder: Path) -> objects.Brief:
    """Everything the form says, with the defaults of `layout.brief.objects` where it says nothing."""
    return objects.Brief(
        title=form.title,
        head=_head(form.head),
        regions=tuple(objects.RegionBrief(**_said(region)) for region in form.regions),
        stock=tuple(_stock(entry, folder) for entry in form.stock),
        places=_places(form.places),
        noise=_noise(form.noise),
        goal=form.goal.kind,
        search=objects.SearchBrief(**_said(form.search)),
        sha256=sha256,
        folder=folder,
    )


def _said(form: schema.Form) -> dict[str, object]:
    """Fields and SI values of the keys the file gives; tables inside are left to the caller."""
    said = {}
    for key in form.model_fields_set:
        value = getattr(form, key)
        if isinstance(value, schema.Form):
            continue
        metadata = type(form).model_fields[key].metadata
        into = next((m for m in metadata if isinstance(m, schema.Into)), schema.Into(key))
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


def _head(form: schema.HeadForm) -> objects.HeadBrief:
    sphere = {}
    if form.kind == "sphere":
        radii, depth = form.radii_mm, form.cortex_depth_mm
        sphere["radii"] = DEFAULT_RADII[form.n_layers] if radii is schema.UNSET else _in_si(radii, MM)
        sphere["cortex_depth"] = DEFAULT_CORTEX_DEPTH if depth is schema.UNSET else _in_si(depth, MM)
    mesh = {} if form.source_mesh is schema.UNSET else {"source_mesh": form.source_mesh}
    conductivities = form.conductivities_s_per_m or DEFAULT_CONDUCTIVITIES[form.n_layers]
    return objects.HeadBrief(kind=form.kind, conductivities=conductivities, **mesh, **sphere)


def _stock(
    form: schema.ElectrodeForm | schema.MagnetometerForm, folder: Path
) -> objects.ElectrodeBrief | objects.MagnetometerBrief:
    kinds = {"electrode": objects.ElectrodeBrief, "magnetometer": objects.MagnetometerBrief}
    sites = {
        key: folder / value if key in ("electrodes_tsv", "slots_csv") else value
        for key, value in _said(form.sites).items()
    }
    return kinds[form.kind](sites=objects.SitesBrief(**sites), **_said(form))


def _places(form: schema.PlacesForm) -> objects.PlacesBrief:
    zones = tuple(objects.ZoneBrief(**_said(zone)) for zone in form.zones)
    return objects.PlacesBrief(**{**_said(form), "zones": zones})


def _noise(form: schema.NoiseForm) -> objects.NoiseBrief:
    parts = (form, form.background, form.eyes, form.surroundings)
    return objects.NoiseBrief(**{field: value for part in parts for field, value in _said(part).items()})
