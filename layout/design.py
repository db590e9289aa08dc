"""The pipeline: from a brief to ranked, certified layouts. The only place that strings the packages together."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from layout import __version__
from layout.anatomy.build import build_head
from layout.anatomy.head import Head, Region
from layout.anatomy.patches import cortex_patches, patches_of
from layout.anatomy.positions import F3_CONVENTION, FAMILIES, family_names, standard_positions
from layout.anatomy.regions import region_strengths, select_region
from layout.anatomy.scalp_points import normals_at, project
from layout.brief.default_heads import DEFAULT_CONDUCTIVITIES
from layout.brief.objects import Brief
from layout.engine.feasible import Feasible
from layout.engine.information import Conditioned, information
from layout.engine.model import LinearModel
from layout.engine.ranking import PROVEN_PERCENT, Chosen, Ranking, rank_layouts
from layout.errors import InfeasibleError
from layout.evidence.baselines import equal_even_spread, yardsticks
from layout.noise.assemble import assemble_noise
from layout.noise.calibration import Calibration, calibrate
from layout.noise.model import NoiseModel
from layout.noise.sensor import sensor_noise
from layout.outputs.check import Check
from layout.outputs.result import Baseline, DesignResult, RankedLayout, SensorRow
from layout.physics.channels import candidate_channels
from layout.physics.sphere_model import Displacements, MappedCortex, SphereModel, fit_sphere_model, map_cortex
from layout.sensing.candidates import Candidates
from layout.sensing.kept import kept_candidates, named_reference
from layout.sensing.lay_out import lay_candidates
from layout.sensing.overlap import boxes_overlap
from layout.units import MM, NAM

Progress = Callable[[str], None]


def silent(doing: str) -> None:
    """Progress that says nothing."""


@dataclass(frozen=True)
class Study:
    """What a brief asks for, laid out on its head: everything that needs no lead field."""

    brief: Brief
    head: Head
    standard: dict[str, np.ndarray]
    candidates: Candidates
    regions: tuple[Region, ...]
    cortex: MappedCortex
    feasible: Feasible

    @property
    def sphere(self) -> SphereModel:
        """The quick model of the head, with the brief's conductivities."""
        return self.cortex.sphere


@dataclass(frozen=True)
class Problem:
    """The study as the engine's linear model, and what was assumed on the way.

    target_columns: region name -> its columns of model.target.
    """

    model: LinearModel
    target_columns: dict[str, slice]
    calibration: Calibration
    displacements: Displacements


def lay_out_study(brief: Brief, progress: Progress = silent) -> Study:
    """Head, regions, candidate sites and rules of a brief. Raises LayoutError where the brief cannot be met."""
    progress("building the head")
    head = build_head(brief.head)
    regions = tuple(select_region(head, region) for region in brief.regions)
    progress("laying the candidate sites")
    standard = standard_positions(head.scalp, head.landmarks)
    candidates = lay_candidates(head, brief, standard)
    feasible = Feasible(
        group=candidates.kind,
        counts=np.array([entry.count for entry in brief.stock]),
        cliques=candidates.cliques,
        keep=kept_candidates(brief, candidates),
    )
    _check_room(brief, feasible)
    cortex = map_cortex(fit_sphere_model(head, np.array(brief.head.conductivities)), head)
    return Study(brief, head, standard, candidates, regions, cortex, feasible)


def _check_room(brief: Brief, feasible: Feasible) -> None:
    try:
        feasible.any_set(np.zeros(feasible.n_candidates))
    except InfeasibleError:
        counts = ", ".join(str(entry.count) for entry in brief.stock)
        spacings = ", ".join(f"{entry.spacing / MM:g}" for entry in brief.stock)
        raise InfeasibleError(
            "stock.count: must leave room for all sensors on the allowed sites under spacing_mm and places.keep, but "
            f"{counts} with a spacing_mm of {spacings} was given"
        ) from None


def build_problem(study: Study, progress: Progress = silent) -> Problem:
    """Lead fields and noise of a study, as rows for the engine."""
    brief, head = study.brief, study.head
    channels = candidate_channels(study.candidates)
    progress("lead fields of the regions")
    targets, columns, start = [], {}, 0
    for region in study.regions:
        field = channels.lead_field(study.cortex, region.members, free=region.free_orientation)
        targets.append(_region_columns(region, field.gain, region.areas))
        columns[region.name] = slice(start, start + targets[-1].shape[1])
        start += targets[-1].shape[1]
    progress("background activity")
    labels = _patches(study)
    calibration = _calibrated(study, labels)
    background = head.cortex.areas.copy()
    if not brief.noise.regions_in_background:
        for region in study.regions:
            background[region.members] -= region.areas
        background = np.maximum(background, 0.0)
    noise: NoiseModel = assemble_noise(
        channels,
        study.cortex,
        brief.noise,
        calibration,
        labels,
        background,
        sensor_noise(head, brief, study.candidates, study.standard),
    )
    target, nuisance, offset = noise.rows(np.hstack(targets))
    model = LinearModel(target, nuisance, offset, study.candidates.candidate_of_channel)
    return Problem(model, columns, calibration, channels.displacements(study.cortex))


def examine(brief: Brief, progress: Progress = silent) -> Check:
    """What a design of this brief would work on, without a search."""
    study = lay_out_study(brief, progress)
    progress("background activity")
    calibration = _calibrated(study, _patches(study))
    return Check(
        brief=brief,
        head=study.head,
        standard=study.standard,
        regions=study.regions,
        candidates=study.candidates,
        conflicts=study.feasible.conflicts,
        kept=study.feasible.keep,
        reference=named_reference(brief, study.candidates),
        sphere=study.sphere,
        displacements=candidate_channels(study.candidates).displacements(study.cortex),
        figures_of_noise=calibration.figures(brief.noise.bandwidth, _has_magnetometers(brief)),
    )


def _has_magnetometers(brief: Brief) -> bool:
    return any(entry.kind == "magnetometer" for entry in brief.stock)


def _region_columns(region: Region, gain: np.ndarray, areas: np.ndarray) -> np.ndarray:
    """Response of the channels to each independent source of a region at its expected strength [V or T]."""
    if region.coherent:
        weight = region.moment * areas / areas.sum()
        if gain.ndim == 2:
            return (gain @ weight)[:, None]
        return np.einsum("nmk,m->nk", gain, weight) / np.sqrt(3.0)
    strength = region_strengths(areas, region.moment)
    if gain.ndim == 2:
        return gain * strength
    return (gain * strength[:, None]).reshape(len(gain), -1) / np.sqrt(3.0)


def _patches(study: Study) -> np.ndarray:
    """Background patches, the same pieces of cortex whatever the density of the sources."""
    head, area = study.head, study.brief.noise.patch_area
    if study.brief.head.source_mesh == "standard":
        return cortex_patches(head.cortex, area)
    standard = build_head(replace(study.brief.head, source_mesh="standard")).cortex
    return patches_of(head.cortex, standard, cortex_patches(standard, area))


def _calibrated(study: Study, labels: np.ndarray) -> Calibration:
    head = study.head
    sites = {name: study.standard[name] for name in family_names("10-20") if name in study.standard}
    normals = normals_at(head.scalp, project(head.scalp, np.array(list(sites.values()))))
    nominal = np.array(DEFAULT_CONDUCTIVITIES[len(study.sphere.conductivities)])
    return calibrate(study.cortex, nominal, study.brief.noise, labels, sites, normals)


def design(brief: Brief, progress: Progress = silent) -> DesignResult:
    """The main job: ranked layouts with their bounds, baselines and everything the outputs show."""
    study = lay_out_study(brief, progress)
    problem = build_problem(study, progress)
    model, feasible, site = problem.model, study.feasible, study.candidates.site
    search = brief.search
    ranking = rank_layouts(
        model,
        feasible,
        places=site,
        ranked=search.ranked,
        differ_by=search.differ_by or max(1, feasible.size // 8),
        starts=search.starts,
        seed=search.seed,
        parts=search.proof_parts,
        time_allowance=search.time_allowance,
        progress=progress,
    )
    points = study.candidates.sites.positions
    families = tuple(
        (family, np.array([study.standard[n] for n in family_names(family) if n in study.standard]))
        for family in FAMILIES
    )
    axis_names = study.candidates.axis_name
    baselines = yardsticks(model, feasible, points, site, families, search.seed, progress, axis_names)
    best = ranking.layouts[0]
    known_spreads: dict[int, float] = {}
    layouts = []
    for rank, layout in enumerate(ranking.layouts, 1):
        progress(f"describing rank {rank}")
        equal, largest = None, 0
        if len(brief.stock) == 1:
            equal, largest = equal_even_spread(model, feasible, points, site, layout.value, known_spreads)
        layouts.append(_described(study, problem, layout, rank, equal, largest))
    return DesignResult(
        brief=brief,
        version=__version__,
        goal=brief.goal,
        unit="bits",
        layouts=tuple(layouts),
        baselines=tuple(
            Baseline(one.name, one.value, 100.0 * one.value / best.value, one.note, _tuple(one.chosen))
            for one in baselines
        ),
        bound=best.bound,
        root_bound=ranking.root.value,
        weights=ranking.root.weights,
        candidates=study.candidates,
        head=study.head,
        regions=study.regions,
        bound_from=_bound_from(ranking),
        notes=_notes(study, problem, ranking),
        figures_of_noise=problem.calibration.figures(brief.noise.bandwidth, _has_magnetometers(brief)),
        stopped_by_clock=ranking.stopped_by_clock,
        search_effort={
            "starts": ranking.starts,
            "swaps": ranking.swaps,
            "bound rounds": ranking.root.rounds,
            "parts examined": ranking.proof.nodes if ranking.proof else 0,
            "parts left open": ranking.proof.open_parts if ranking.proof else 0,
            "differ by": ranking.differ_by,
        },
        audit=_audit(model, feasible, ranking),
        proven_within=PROVEN_PERCENT,
    )


def _tuple(chosen: np.ndarray | None) -> tuple[int, ...] | None:
    return None if chosen is None else tuple(int(candidate) for candidate in chosen)


def _described(
    study: Study, problem: Problem, layout: Chosen, rank: int, equal: int | None, largest: int
) -> RankedLayout:
    model, candidates = problem.model, study.candidates
    marginal = layout.value - Conditioned(model, layout.chosen).removals()
    reference = _reference(study, layout.chosen, marginal)
    order = sorted(range(len(layout.chosen)), key=lambda i: (candidates.kind[layout.chosen[i]], i))
    sensors = tuple(
        _sensor_row(study, int(layout.chosen[i]), number, float(marginal[i]), layout.chosen[i] == reference)
        for number, i in enumerate(order, 1)
    )
    per_region = {
        name: information(_one_region(model, columns), layout.chosen)
        for name, columns in problem.target_columns.items()
    }
    prices = np.array([entry.price for entry in study.brief.stock])
    return RankedLayout(
        rank=rank,
        value=layout.value,
        bound=layout.bound,
        gap_percent=layout.gap_percent,
        proven=layout.proven,
        cost=float(prices[candidates.kind[layout.chosen]].sum()),
        sensors=sensors,
        moved=layout.moved,
        chosen=_tuple(layout.chosen),
        per_region_bits=per_region,
        equals_even_spread_of=equal,
        even_spread_limit=largest,
        housings_meet=_housings_meet(study, layout.chosen),
    )


def _housings_meet(study: Study, chosen: np.ndarray) -> int | None:
    """How many pairs of chosen magnetometers have housings that share space; None without magnetometers."""
    stock, candidates = study.brief.stock, study.candidates
    housed = [one for one in chosen if stock[candidates.kind[one]].kind == "magnetometer"]
    if not housed:
        return None
    poses = candidates.housing_pose[housed]
    sizes = np.array([stock[kind].housing for kind in candidates.kind[housed]])
    first, second = np.triu_indices(len(housed), 1)
    return int(boxes_overlap(poses[first], sizes[first], poses[second], sizes[second]).sum())


def _one_region(model: LinearModel, columns: slice) -> LinearModel:
    """The model in which one region is wanted and the others are nuisance."""
    others = np.delete(model.target, np.arange(columns.start, columns.stop), axis=1)
    return LinearModel(
        model.target[:, columns],
        np.hstack([model.nuisance, others]),
        model.offset,
        model.candidate_of_channel,
    )


def _reference(study: Study, chosen: np.ndarray, marginal: np.ndarray) -> int | None:
    """The contact to call the reference: the brief's, else the one that matters least; any other would do."""
    contacts = [i for i, one in enumerate(chosen) if study.brief.stock[study.candidates.kind[one]].kind == "electrode"]
    if not contacts:
        return None
    named = named_reference(study.brief, study.candidates)
    if named is not None:
        return named
    return int(chosen[min(contacts, key=lambda i: marginal[i])])


def _sensor_row(study: Study, candidate: int, number: int, marginal: float, is_reference: bool) -> SensorRow:
    candidates, sites = study.candidates, study.candidates.sites
    entry = study.brief.stock[candidates.kind[candidate]]
    site = candidates.site[candidate]
    rows = candidates.candidate_of_channel == candidate
    return SensorRow(
        number=number,
        candidate=candidate,
        name=candidates.names[candidate],
        kind=entry.name,
        kind_type=entry.kind,
        site=sites.names[site],
        position=candidates.positions[rows][0],
        scalp_position=sites.positions[site],
        axis_name=candidates.axis_name[candidate],
        axes=candidates.axes[rows],
        nearest_name=sites.nearest_name[site],
        nearest_offset=float(sites.nearest_offset[site]),
        landmark_distance=sites.landmark_distance[site],
        arc_fractions=sites.arc_fractions[site],
        marginal_bits=marginal,
        role="reference" if is_reference else "",
    )


def _bound_from(ranking: Ranking) -> str:
    """Which of the three ways gave the first layout's bound."""
    relaxed = min(one.value for one in (ranking.root, ranking.by_rank) if one is not None)
    if ranking.proof is not None and ranking.proof.bound < relaxed:
        return "branch and bound"
    if ranking.by_rank is not None and ranking.by_rank.value < ranking.root.value:
        return "the rank-aware relaxation"
    return "the relaxation, which lets fractions of sensors be placed"


def _notes(study: Study, problem: Problem, ranking: Ranking) -> dict[str, tuple[str, ...]]:
    notes = {
        "Sites": (*study.candidates.notes, *_axis_notes(study.brief), f"Standard positions: {F3_CONVENTION}."),
        "Head and model": study.head.notes,
        "Strengths and noise": _strength_notes(study),
        "Ranking": _ranking_notes(ranking),
    }
    if study.head.sphere is None:
        notes["Head and model"] += (f"Quick physical model of layered spheres; {problem.displacements.summary()}.",)
    return notes


def _axis_notes(brief: Brief) -> tuple[str, ...]:
    if not any(entry.kind == "magnetometer" and entry.axes != "normal" for entry in brief.stock):
        return ()
    return (
        "Axes of a magnetometer: normal points out of the head along its housing, tangent1 towards the front as nearly "
        "as the scalp allows, tangent2 (normal x tangent1) to the left on top of the head, down on its left side and "
        "up on its right side.",
    )


def _strength_notes(study: Study) -> tuple[str, ...]:
    brief = study.brief
    strengths = ", ".join(
        f"{region.name} {one.moment / NAM:g} nAm" for region, one in zip(study.regions, brief.regions, strict=True)
    )
    notes = [f"Bits depend on the assumed strengths ({strengths}); compare layouts by ratios."]
    if any(entry.kind == "electrode" for entry in brief.stock):
        notes.append(
            "The reference is one of the counted electrodes; calling another one the reference changes nothing, and "
            "the ground is not counted."
        )
    return tuple(notes)


def _ranking_notes(ranking: Ranking) -> tuple[str, ...]:
    if len(ranking.layouts) == 1:
        return ()
    sensors = "1 sensor" if ranking.differ_by == 1 else f"{ranking.differ_by} sensors"
    notes = [
        f"Ranked layouts differ from each other by at least {sensors}; a rank's bound covers all layouts that differ "
        "by as much from every earlier rank, among these candidates and under this model."
    ]
    bounds = [layout.bound for layout in ranking.layouts]
    if len(set(bounds)) < len(bounds):
        notes.append(
            "Ranks share a bound where leaving out the layouts near the earlier ranks did not lower it: a bound for "
            "all layouts holds for the remaining ones too."
        )
    return tuple(notes)


def _audit(model: LinearModel, feasible: Feasible, ranking: Ranking) -> dict[str, np.ndarray]:
    """What a stranger needs to recompute every value and the root bound."""
    chosen = np.full((len(ranking.layouts), feasible.size), -1)
    for row, layout in enumerate(ranking.layouts):
        chosen[row, : len(layout.chosen)] = layout.chosen
    return {
        "target": model.target,
        "nuisance": model.nuisance,
        "offset": model.offset,
        "candidate_of_channel": model.candidate_of_channel,
        "conflicts": np.argwhere(np.triu(feasible.conflicts)),
        "group": feasible.group,
        "counts": feasible.counts,
        "keep": np.array(feasible.keep, dtype=int),
        "clique_members": np.concatenate([*feasible.cliques, np.zeros(0, dtype=int)]).astype(int),
        "clique_starts": np.cumsum([0, *(len(clique) for clique in feasible.cliques)]),
        "chosen": chosen,
        "weights": ranking.root.weights,
        "values": np.array([layout.value for layout in ranking.layouts]),
        "bounds": np.array([layout.bound for layout in ranking.layouts]),
        "root_bound": np.array(ranking.root.value),
        "rank_bound": np.array(np.nan if ranking.by_rank is None else ranking.by_rank.value),
        "rank_weights": np.zeros(0) if ranking.by_rank is None else ranking.by_rank.weights,
        "bound": np.array(ranking.layouts[0].bound),
        "schema": np.array(1),
    }
