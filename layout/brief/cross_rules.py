"""Rules of the brief that join several of its tables, each a refusal in one sentence."""

from __future__ import annotations

from typing import TYPE_CHECKING

from layout.brief.default_heads import DEFAULT_CONDUCTIVITIES
from layout.brief.objects import BUILT_IN_ZONES, least_count
from layout.brief.objects_stock import ElectrodeBrief
from layout.brief.schema_axes import mirrored, parallel
from layout.brief.schema_common import UNSET, broken_rule
from layout.brief.schema_gradiometer import GradiometerForm
from layout.brief.schema_stock import ElectrodeForm, MagnetometerForm

if TYPE_CHECKING:
    from layout.brief.schema import BriefForm


def check_across_tables(form: BriefForm) -> None:
    """Raises the first refusal."""
    _check_zones(form)
    _check_references(form)
    _check_counts(form)
    _check_least_counts(form)
    _check_regions_of_goal(form)
    _check_target(form)
    _check_budget(form)
    _check_scenarios(form)
    _check_pairs(form)
    _check_ground(form)
    _check_existing(form)
    _check_polish(form)
    _check_given_lead_field(form)


def _least(form: BriefForm) -> list[int]:
    has_budget, has_target = form.budget is not UNSET, form.goal.has_target
    return [least_count(one.kind, one.count, one.count_at_least, has_budget, has_target) for one in form.stock]


def _electrode_entries(form: BriefForm) -> list[int]:
    return [i for i, entry in enumerate(form.stock) if isinstance(entry, ElectrodeForm)]


def _check_zones(form: BriefForm) -> None:
    known = (*BUILT_IN_ZONES, *(zone.name for zone in form.places.zones))
    for i, entry in enumerate(form.stock):
        for key in ("keep_out", "only_in", "contact_noise_in_uv"):
            for zone in getattr(entry, key, UNSET) or ():
                if zone not in known:
                    rule = f"must name known zones ({', '.join(known)})"
                    raise broken_rule(rule, "stock", i, key, value=zone)
    counts = {entry.name: entry.count for entry in form.stock}
    for i, zone in enumerate(form.places.zones):
        for kind in zone.kinds or ():
            if kind not in counts:
                rule = f"must name entries of the stock ({', '.join(counts)})"
                raise broken_rule(rule, "places", "zones", i, "kinds", value=kind)
        most = sum(counts[kind] for kind in zone.kinds or counts)
        if (zone.at_least or 0) > most:
            rule = f"must be at most {most}, the number of such sensors in stock"
            raise broken_rule(rule, "places", "zones", i, "at_least")


def _check_references(form: BriefForm) -> None:
    named = [
        (i, form.stock[i].named_reference)
        for i in _electrode_entries(form)
        if form.stock[i].named_reference is not None
    ]
    for i, site in named[1:]:
        rule = 'must be "any" (all electrodes share one reference, and an earlier entry names it)'
        raise broken_rule(rule, "stock", i, "reference", value=site)
    for i, site in named:
        if site in (form.places.forbid or ()):
            raise broken_rule("must not be a site that places.forbid names", "stock", i, "reference")
        if site == form.places.ground:
            raise broken_rule("must not be the site that places.ground names", "stock", i, "reference")


def _check_counts(form: BriefForm) -> None:
    electrodes = _electrode_entries(form)
    if electrodes and sum(form.stock[i].count for i in electrodes) < 2:
        raise broken_rule("must be at least 2 (one electrode is the reference)", "stock", electrodes[0], "count")
    total = sum(entry.count for entry in form.stock)
    if (form.search.differ_by or 0) > total:
        raise broken_rule(f"must be at most {total}, the number of sensors in stock", "search", "differ_by")
    if len(form.places.keep or ()) > total:
        rule = f"must name at most {total} sites, the number of sensors in stock"
        raise broken_rule(rule, "places", "keep", value=len(form.places.keep))


def _check_least_counts(form: BriefForm) -> None:
    for i, entry in enumerate(form.stock):
        if entry.count_at_least is not UNSET and form.budget is UNSET and not form.goal.has_target:
            rule = "must be left out unless there is a [budget] or a goal to reach (reach_bits, reach_mm)"
            raise broken_rule(rule, "stock", i, "count_at_least")
    said = [i for i in _electrode_entries(form) if form.stock[i].count_at_least is not UNSET]
    least = _least(form)
    if said and sum(least[i] for i in _electrode_entries(form)) == 1:
        rule = "must be 0 or at least 2 for all electrodes together (one electrode is the reference)"
        raise broken_rule(rule, "stock", said[0], "count_at_least")


def _check_regions_of_goal(form: BriefForm) -> None:
    known = [region.name for region in form.regions]
    for key in ("region_weights", "error_limits_mm"):
        for name in getattr(form.goal, key) or ():
            if name not in known:
                raise broken_rule(f"must name regions of the brief ({', '.join(known)})", "goal", key, value=name)
    weights = form.goal.region_weights
    for name in known:
        if weights is not UNSET and name not in weights:
            raise broken_rule(
                f'must give every region a weight (0 is allowed), also "{name}"', "goal", "region_weights"
            )


def _check_target(form: BriefForm) -> None:
    if not form.goal.has_target:
        return
    key = "reach_mm" if form.goal.reach_bits is UNSET else "reach_bits"
    if len(form.stock) > 1:
        rule = "must be left out where the stock has several entries (the smallest count is that of one)"
        raise broken_rule(rule, "goal", key)
    if form.budget is not UNSET:
        raise broken_rule("must be left out where there is a [budget]", "goal", key)


def _least_channels(entry: ElectrodeForm | MagnetometerForm | GradiometerForm) -> int:
    """Channels that one sensor of the entry has."""
    if isinstance(entry, GradiometerForm):
        return 2 if entry.gradients == "both_tangents" else 1
    several = {"two_axis": 2, "free_two": 2, "three_axis": 3}
    return several.get(entry.axes, 1) if isinstance(entry, MagnetometerForm) and isinstance(entry.axes, str) else 1


def _check_budget(form: BriefForm) -> None:
    budget = form.budget
    if budget is UNSET:
        return
    cost, channels = 0.0, 0
    for entry, least in zip(form.stock, _least(form), strict=True):
        per_sensor = ElectrodeBrief.price if entry.price is UNSET else entry.price
        cost += least * (per_sensor + _least_channels(entry) * (entry.price_per_channel or 0.0))
        channels += least * _least_channels(entry)
    if budget.block_channels is not UNSET:
        cost += -(-channels // budget.block_channels) * budget.block_price
    if cost > budget.total * (1 + 1e-12):
        rule = f"must be at least {cost:g}, what the least counts (count_at_least) cost"
        raise broken_rule(rule, "budget", "total")


def _check_scenarios(form: BriefForm) -> None:
    own = form.head.conductivities_s_per_m or DEFAULT_CONDUCTIVITIES[form.head.n_layers]
    for i, values in enumerate(form.scenarios.conductivities_s_per_m or ()):
        if len(values) != form.head.n_layers:
            rule = f"must have one value for each of the head's {form.head.n_layers} layers"
            raise broken_rule(rule, "scenarios", "conductivities_s_per_m", i)
        if values == tuple(own):
            rule = "must differ from the head's own conductivities (they are always the first scenario)"
            raise broken_rule(rule, "scenarios", "conductivities_s_per_m", i)
    if form.scenarios.heads is not UNSET and form.head.kind != "template":
        raise broken_rule('must be left out unless head.kind is "template"', "scenarios", "heads")
    magnetometers = len(_electrode_entries(form)) < len(form.stock)
    if form.scenarios.pose_error_degrees is not UNSET and not magnetometers:
        rule = "must be left out where the stock has no magnetometers (electrodes have no axis)"
        raise broken_rule(rule, "scenarios", "pose_error_degrees")
    if form.scenarios.any_one_lost:
        fewest = 2 if magnetometers else 3
        if sum(entry.count for entry in form.stock) < fewest:
            rule = f"must be false where the stock has fewer than {fewest} sensors (the rest would tell nothing)"
            raise broken_rule(rule, "scenarios", "any_one_lost")


def _check_pairs(form: BriefForm) -> None:
    if not form.places.left_right_pairs:
        return
    for i, entry in enumerate(form.stock):
        if isinstance(entry, ElectrodeForm) or entry.axes is UNSET:
            continue
        if entry.is_free:
            rule = "must be a fixed choice of axes where places.left_right_pairs is true"
            raise broken_rule(rule, "stock", i, "axes")
        for number, axis in enumerate(() if isinstance(entry.axes, str) else entry.axes):
            if not any(parallel(mirrored(axis), other) for other in entry.axes):
                rule = "must come with its mirror image [normal, front, -left] where places.left_right_pairs is true"
                raise broken_rule(rule, "stock", i, "axes", number)


def _check_ground(form: BriefForm) -> None:
    if form.places.ground is not UNSET and not _electrode_entries(form):
        raise broken_rule("must be left out where the stock has no electrodes", "places", "ground")


def _check_existing(form: BriefForm) -> None:
    if form.existing is UNSET or form.existing.sites is UNSET:
        return
    sites, use = form.existing.sites, form.existing.use
    most, least = sum(entry.count for entry in form.stock), sum(_least(form))
    if use == "extend" and len(sites) > most:
        rule = f"must name at most {most} sites, the number of sensors in stock (they are counted)"
        raise broken_rule(rule, "existing", "sites", value=len(sites))
    if use == "trim" and not form.places.left_right_pairs and len(sites) < least:
        rule = f"must name at least {least} sites, the number of sensors to choose from them"
        raise broken_rule(rule, "existing", "sites", value=len(sites))
    for site in sites:
        if site in (form.places.forbid or ()):
            raise broken_rule("must not name a site that places.forbid names", "existing", "sites", value=site)
        if site == form.places.ground:
            raise broken_rule("must not name the site that places.ground names", "existing", "sites", value=site)


def _check_given_lead_field(form: BriefForm) -> None:
    """A lead field from a file holds for one head and one place of each sensor, and has no derivatives."""
    if form.head.lead_field_file is UNSET:
        return
    why = "where head.lead_field_file gives the lead field (it holds for one model and one place of each sensor)"
    for key in ("conductivities_s_per_m", "heads", "pose_error_mm", "pose_error_degrees"):
        if getattr(form.scenarios, key, UNSET) is not UNSET:
            raise broken_rule(f"must be left out {why}", "scenarios", key)
    if form.search.polish:
        raise broken_rule(f"must be false {why}", "search", "polish")
    if form.goal.kind == "localisation":
        raise broken_rule('must be "information" where head.lead_field_file gives the lead field', "goal", "kind")
    if form.goal.error_limits_mm is not UNSET:
        raise broken_rule(f"must be left out {why}", "goal", "error_limits_mm")


def _check_polish(form: BriefForm) -> None:
    if form.search.polish and form.places.left_right_pairs:
        raise broken_rule("must be false where places.left_right_pairs is true", "search", "polish")
    if form.search.polish and all(entry.sites.slots_csv is not UNSET for entry in form.stock):
        rule = "must be false where all sensors sit in helmet slots (they cannot slide along the scalp)"
        raise broken_rule(rule, "search", "polish")
