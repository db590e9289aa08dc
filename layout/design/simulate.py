"""Does a layout really localise: planted dipoles, noise of the full model, fits, and the errors beside the bound."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import NamedTuple

import numpy as np

from layout import __version__
from layout.anatomy.positions import FAMILIES, family_names
from layout.brief.objects import Brief, ExistingBrief
from layout.design.found import find_layouts
from layout.design.objective import build_objective
from layout.design.problem import Problem, build_problem, build_problems
from layout.design.study import Progress, Study, as_part, lay_out_study, silent
from layout.design.turned import all_normal, has_free_axes
from layout.engine.localisation import LocalisationModel, linearised_errors
from layout.errors import BriefError
from layout.evidence.baselines import evenly, standard_subset
from layout.evidence.dipole_fit import Priors, cramer_rao_errors
from layout.evidence.minimum_norm import minimum_norm_kernel, noise_normalised, peaks, point_spread
from layout.evidence.simulation import (
    ChannelNoise,
    Plants,
    compare,
    depth_bands,
    drawn_priors,
    fits_of_plants,
    marked_crossings,
    plant,
)
from layout.evidence.simulation_forward import fields_at, fields_on, forward_of, held_inside, some_channels, volume_grid
from layout.outputs.simulation_result import ErrorRow, Simulation, SpreadRow, TestedLayout
from layout.physics.nearest_point import nearest_on_surface
from layout.sensing.existing import existing_singles
from layout.sensing.names import named_singles
from layout.units import MM

NOISE_FACTORS = (1.0, 0.3, 0.1, 0.05)
SHIFT = 2 * MM
VOLUME_SPACING = 5 * MM
QUICK_STARTS = 5
PLANTS, NOISE, PRIORS = 11, 12, 13  # keep the draws apart from one another and from those of the search
FEWEST_FITS, MOST_FITS = 10, 100_000


@dataclass(frozen=True)
class _Tried:
    """A layout to be tried: chosen candidates of a study and its problem."""

    name: str
    chosen: np.ndarray
    study: Study
    problem: Problem
    note: str = ""


class _Fields(NamedTuple):
    """Lead fields of a layout's channels (n_channels, ..., 3) [V or T per A·m]: to the cortex, the grid and the plants,
    and the slopes at the plants [V/m or T/m].
    """

    cortex: np.ndarray
    grid: np.ndarray
    plants: np.ndarray
    slopes: np.ndarray


@dataclass(frozen=True)
class _Trial:
    """What every layout is tried with; grid (m, 3) [m] or None: the cortex."""

    plants: Plants
    priors: tuple[Priors, ...] | None
    noise_factors: tuple[float, ...]
    grid: np.ndarray | None
    groups: tuple[tuple[str, str, np.ndarray], ...]


def simulate(
    brief: Brief,
    layout: str = "1",
    fits: int = 1000,
    noise_factors: Sequence[float] = NOISE_FACTORS,
    with_priors: bool = False,
    in_volume: bool = False,
    progress: Progress = silent,
) -> Simulation:
    """Plant `fits` dipoles in the regions and find them again with a layout and with the baselines of its count.

    layout: the rank of a layout found by a quick search; or the path of a sensors.csv or electrodes.tsv; or names of
    sites or candidates, parted by commas. noise_factors: of all noise amplitudes, one run of the fits for each.
    with_priors: the fits know the priors of the brief's goal, as measurements of each plant with the priors' spreads,
    and are compared with the linearised errors instead of the Cramér-Rao bound. in_volume: fits start from a lattice
    through the brain instead of the cortex. Deterministic for the brief's seed. Raises LayoutError.
    """
    factors = _checked(brief, fits, noise_factors)
    study = lay_out_study(brief, progress)
    tried = _tried(study, layout, progress)
    seed = brief.search.seed
    drawn = plant(study.head, study.regions, fits, SHIFT, np.random.default_rng([seed, PLANTS]))
    drawn = replace(drawn, places=held_inside(study.cortex, drawn.places))
    priors = None
    if with_priors:
        goal, rng = brief.goal, np.random.default_rng([seed, PRIORS])
        priors = drawn_priors(drawn, study.regions, goal.position_prior, goal.moment_spread, rng)
    grid = volume_grid(study.cortex, VOLUME_SPACING) if in_volume else None
    trial = _Trial(drawn, priors, factors, grid, _groups(study, drawn))
    layouts, errors, spreads = [], [], []
    fields = _fields(tried, trial, progress)
    for number, (one, field) in enumerate(zip(tried, fields, strict=True), 1):
        part = as_part(progress, f"layout {number} of {len(tried)}")
        rows, spread = _try(one, field, trial, np.random.default_rng([seed, NOISE]), part)
        layouts.append(_described(one, rows))
        errors += rows
        spreads += spread
    points = len(study.head.cortex) if grid is None else len(grid)
    return Simulation(
        brief=brief,
        version=__version__,
        seed=seed,
        fits=fits,
        noise_factors=factors,
        shift=SHIFT,
        bound="linearised error with the brief's priors" if with_priors else "Cramér-Rao bound",
        grid=f"{points:,} {'places through the brain' if in_volume else 'sources of the cortex'}",
        layouts=tuple(layouts),
        errors=tuple(errors),
        spreads=tuple(spreads),
        notes=_notes(study, with_priors),
    )


def factors_in(text: str) -> tuple[float, ...]:
    """The numbers of a list parted by commas. Raises BriefError."""
    try:
        return tuple(float(part) for part in text.split(","))
    except ValueError:
        raise BriefError(f"noise must be numbers parted by commas, but {text!r} was given") from None


def _checked(brief: Brief, fits: int, noise_factors: Sequence[float]) -> tuple[float, ...]:
    if not FEWEST_FITS <= fits <= MOST_FITS:
        raise BriefError(f"fits must be a whole number from {FEWEST_FITS} to {MOST_FITS:,}, but {fits} was given")
    factors = tuple(sorted({float(factor) for factor in noise_factors}, reverse=True))
    if not factors or not all(1e-6 <= factor <= 1e3 for factor in factors):
        said = ", ".join(f"{factor:g}" for factor in noise_factors)
        raise BriefError(f"noise must be factors from 1e-6 to 1000, one at least, but [{said}] was given")
    if brief.head.lead_field_file is not None:
        raise BriefError(
            "head.lead_field_file: must be left out where dipoles are simulated, since its gain holds at the head's "
            f"sources only, but {str(brief.head.lead_field_file)!r} was given"
        )
    return factors


def _tried(study: Study, layout: str, progress: Progress) -> list[_Tried]:
    """The layout asked for, then an even spread and standard positions of as many sensors."""
    if layout.isdecimal():
        first, plain, problem = _searched(study, int(layout), progress)
    else:
        plain, problem = study, build_problem(study, progress)
        if has_free_axes(study.candidates):
            plain, problem = _all_normal(study, problem, progress)
        first = _Tried("given layout", _given(plain, layout), plain, problem)
    counts = np.bincount(
        first.study.candidates.singles.kind[first.study.candidates.single_sensors(first.chosen)],
        minlength=len(study.brief.stock),
    )
    candidates, feasible = plain.candidates, plain.feasible
    if candidates.pairs is not None:
        return [first]
    points, site = candidates.sites.positions, candidates.site
    tried = [first, _Tried("even spread", evenly(points, site, feasible, counts), plain, problem)]
    families = tuple(
        (family, np.array([study.standard[name] for name in family_names(family) if name in study.standard]))
        for family in FAMILIES
    )
    chosen, note = standard_subset(points, site, feasible, counts, families)
    if chosen is not None:
        tried.append(_Tried("standard positions", chosen, plain, problem, note))
    return tried


def _searched(study: Study, rank: int, progress: Progress) -> tuple[_Tried, Study, Problem]:
    """The layout of that rank by a quick search, and the study and problem of the baselines."""
    goal, search = study.brief.goal, study.brief.search
    if goal.has_target:
        key = "goal.reach_bits" if goal.reach_bits is not None else "goal.reach_error_mm"
        raise BriefError(
            f"{key}: must be left out where the layout to simulate is to be searched for; name a sensors.csv instead"
        )
    if not 1 <= rank <= search.ranked:
        raise BriefError(f"layout must be a rank from 1 to search.ranked ({search.ranked}), but {rank} was given")
    quick = replace(search, starts=min(search.starts, QUICK_STARTS), proof_parts=0, ranked=rank, polish=False)
    at_once = replace(study, brief=replace(study.brief, search=quick))
    problems = build_problems(at_once, progress)
    found = find_layouts(at_once, build_objective(at_once, problems), progress)
    if rank > len(found.layouts):
        raise BriefError(f"layout must be a rank that the search finds, but of {rank} it found {len(found.layouts)}")
    own, plain = found.at[rank - 1][0], found.plain[0]
    first_problem = plain_problem = problems[0]
    if has_free_axes(study.candidates):
        first_problem = build_problem(own, progress, calibration=problems[0].calibration)
        plain_problem = build_problem(plain, progress, calibration=problems[0].calibration)
    note = "by a quick search without proof"
    first = _Tried(f"layout {rank}", found.layouts[rank - 1].chosen, own, first_problem, note)
    return first, plain, plain_problem


def _all_normal(study: Study, problem: Problem, progress: Progress) -> tuple[Study, Problem]:
    """Study and problem with every free axis along the normal."""
    plain, _ = all_normal(study, build_objective(study, (problem,)))
    return plain, build_problem(plain, progress, calibration=problem.calibration)


def _given(study: Study, layout: str) -> np.ndarray:
    """The candidates of a table or of names parted by commas; a site's first option where several may be meant."""
    candidates = study.candidates
    path = Path(layout)
    if path.suffix in (".csv", ".tsv"):
        asked = replace(study.brief, existing=ExistingBrief("trim", layout_tsv=path.absolute()))
        found = existing_singles(asked, candidates)
    else:
        names = [name.strip() for name in layout.split(",") if name.strip()]
        found = {f"layout {name!r}": named_singles(candidates, name, "layout") for name in names}
    if not found:
        raise BriefError(f"layout must be a rank, a .csv or .tsv table, or names parted by commas, not {layout!r}")
    chosen = []
    for said, here in found.items():
        one = candidates.holding(int(here[0]))
        if one is None:
            raise BriefError(f"{said}: must have a mirror image where places.left_right_pairs is true, but has none")
        if one not in chosen:
            chosen.append(one)
    return np.array(chosen)


def _groups(study: Study, plants: Plants) -> tuple[tuple[str, str, np.ndarray], ...]:
    """(over, name, plants (n,) bool): all plants, each region's, each band of depth's where there are several."""
    groups = [("all", "all regions", np.ones(len(plants), dtype=bool))]
    if len(study.regions) > 1:
        groups += [("region", region.name, plants.region == number) for number, region in enumerate(study.regions)]
    bands = depth_bands(nearest_on_surface(study.head.scalp, plants.places).inside_depth)
    if len(bands) > 1:
        groups += [("depth", name, inside) for name, inside in bands.items()]
    return tuple(groups)


def _fields(tried: list[_Tried], trial: _Trial, progress: Progress) -> list[_Fields]:
    """The fields of every layout; those of one problem are computed together, as the sources are what takes long."""
    found: dict[int, _Fields] = {}
    for number, one in enumerate(tried):
        if number in found:
            continue
        progress(f"lead fields of the whole brain: {one.name}")
        alike = [k for k, other in enumerate(tried) if other.problem is one.problem]
        rows = [one.problem.model.channels_of(tried[k].chosen) for k in alike]
        channels = some_channels(one.problem.scenario.channels, np.concatenate(rows))
        cortex = one.study.cortex
        on_cortex = fields_on(channels, cortex, None)
        on_grid = on_cortex if trial.grid is None else fields_on(channels, cortex, trial.grid)
        progress(f"lead fields beside the plants: {one.name}")
        of_plants = fields_at(channels, cortex, trial.plants.places, trial.plants.moments)
        first = 0
        for k, mine in zip(alike, rows, strict=True):
            part = slice(first, first + len(mine))
            found[k] = _Fields(on_cortex[part], on_grid[part], of_plants.gain[part], of_plants.slopes[part])
            first += len(mine)
    return [found[number] for number in range(len(tried))]


def _try(
    one: _Tried, fields: _Fields, trial: _Trial, rng: np.random.Generator, progress: Progress
) -> tuple[list[ErrorRow], list[SpreadRow]]:
    """Everything about one layout."""
    study, model, plants = one.study, one.problem.model, trial.plants
    rows = model.channels_of(one.chosen)
    noise = ChannelNoise(one.problem.sensor_sd[rows], model.nuisance[rows], model.offset[rows])
    whitener = noise.whitener()
    if not len(whitener):
        raise BriefError(f"layout must hold more than one electrode, but {one.name} holds no other channel")
    forward = forward_of(some_channels(one.problem.scenario.channels, rows), study.cortex, whitener)
    cortex_gain, grid_gain, gain, slopes = (np.tensordot(whitener, part, 1) for part in fields)
    grid = study.head.cortex.positions if trial.grid is None else trial.grid
    signals = np.einsum("ink,nk->in", gain, plants.moments)
    drawn = whitener @ noise.draw(len(plants), rng)
    snr = float(np.sqrt(np.mean(signals**2)))
    found = []
    for number, factor in enumerate(trial.noise_factors, 1):
        progress(f"fitting dipoles, noise {number} of {len(trial.noise_factors)}: x {factor:g}")
        fits = fits_of_plants(forward, grid, grid_gain, signals + factor * drawn, plants, factor, trial.priors)
        errors = np.linalg.norm(fits.places - plants.places, axis=1)
        on_grid = np.linalg.norm(grid[fits.grid] - plants.places, axis=1)
        linearised = _linearised(study, plants, gain / factor, slopes / factor)
        bounds = linearised if trial.priors is not None else cramer_rao_errors(gain / factor, slopes / factor)
        for over, name, inside in trial.groups:
            figures = compare(errors[inside], on_grid[inside], bounds[inside], linearised[inside])
            found.append(ErrorRow(one.name, over, name, factor, snr / factor, figures))
    return _with_crossings(found), _spreads(one, cortex_gain, signals, drawn, plants, snr)


def _with_crossings(rows: list[ErrorRow]) -> list[ErrorRow]:
    """The rows, their levels from the most noise to the least, each marked by what the levels under it show."""
    standing = {}
    for key in dict.fromkeys((row.over, row.group) for row in rows):
        rising = [row for row in reversed(rows) if (row.over, row.group) == key]
        for row, figures in zip(rising, marked_crossings([row.figures for row in rising]), strict=True):
            standing[(*key, row.noise_factor)] = figures
    return [replace(row, figures=standing[row.over, row.group, row.noise_factor]) for row in rows]


def _linearised(study: Study, plants: Plants, gain: np.ndarray, slopes: np.ndarray) -> np.ndarray:
    """Linearised error (n,) [m] of each plant, with the priors of the brief's goal."""
    goal, n = study.brief.goal, len(plants)
    moment = goal.moment_spread * np.array([region.moment for region in study.regions])[plants.region]
    model = LocalisationModel(
        derivatives=np.concatenate([goal.position_prior * slopes, moment[None, :, None] * gain], axis=2),
        nuisance=np.zeros((len(gain), 0)),
        offset=np.zeros(len(gain)),
        candidate_of_channel=np.arange(len(gain)),
        spread=np.full((n, 3), goal.position_prior),
        share=np.full(n, 1.0 / n),
        region=plants.region,
    )
    return linearised_errors(model, np.arange(len(gain)))


def _spreads(
    one: _Tried,
    gain: np.ndarray,
    signals: np.ndarray,
    drawn: np.ndarray,
    plants: Plants,
    snr: float,
) -> list[SpreadRow]:
    """The minimum-norm map of each region's plants."""
    cortex, regions = one.study.head.cortex, one.study.regions
    if not _free_map(one.study):
        gain = np.einsum("imk,mk->im", gain, cortex.normals)[:, :, None]
    kernel = noise_normalised(minimum_norm_kernel(gain, cortex.areas, snr), gain.shape[2])
    found = []
    for number, region in enumerate(regions):
        mine = plants.region == number
        if not mine.any():
            continue
        places = plants.places[mine]
        spread = point_spread(kernel, signals[:, mine], places, cortex.positions, cortex.areas)
        noisy = cortex.positions[peaks(kernel, signals[:, mine] + drawn[:, mine])]
        found.append(
            SpreadRow(
                one.name,
                region.name,
                float(spread.displacement.mean()),
                float(spread.dispersion.mean()),
                float(np.median(np.linalg.norm(noisy - places, axis=1))),
            )
        )
    return found


def _free_map(study: Study) -> bool:
    return not study.head.normal_orientation or any(region.free_orientation for region in study.regions)


def _described(one: _Tried, rows: list[ErrorRow]) -> TestedLayout:
    threshold = None
    for row in sorted((row for row in rows if row.over == "all"), key=lambda row: row.noise_factor):
        if row.figures.standing != "follows":
            break
        threshold = row.noise_factor
    names = one.study.candidates.singles.names
    sensors = tuple(names[sensor] for sensor in one.study.candidates.single_sensors(one.chosen))
    channels = len(one.problem.model.channels_of(one.chosen))
    return TestedLayout(one.name, sensors, channels, one.note, threshold)


def _notes(study: Study, with_priors: bool) -> tuple[str, ...]:
    known = "the priors of the brief's goal" if with_priors else "nothing beforehand"
    sources = "free moments" if _free_map(study) else "moments along the cortex's normals"
    notes = [
        f"Each plant is one dipole with the whole moment of its region, within {SHIFT / MM:g} mm of one of its "
        "sources, along the cortex's normal or, where the moment is free, along one of the head's axes.",
        "Noise is drawn from the whole model: sensors, background, eyes, surroundings, and an unknown reference.",
        f"The fits know the noise's covariance, the head model exactly and {known}; their moments are free, and "
        "they may leave the cortex for anywhere in the brain: a real study knows less.",
        f"The minimum-norm map has {sources} of a strength that grows with the area, and the regularisation that "
        "fits the plants' signal-to-noise ratio.",
    ]
    if study.candidates.pairs is not None:
        notes.append("Baselines are left out under places.left_right_pairs.")
    return tuple(notes)
