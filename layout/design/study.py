"""What a brief asks for, laid out on its head: everything that needs no lead field."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from layout.anatomy.build import build_head
from layout.anatomy.head import Head, Region
from layout.anatomy.positions import standard_positions
from layout.anatomy.regions import select_region
from layout.brief.objects import Brief, HeadBrief
from layout.brief.objects_stock import HOUSED
from layout.engine.clash import clashing_rules
from layout.engine.feasible import Feasible
from layout.engine.rules import Budget, Rule
from layout.errors import InfeasibleError
from layout.physics.boundary_cortex import BoundaryCortex
from layout.physics.channels import CortexModel
from layout.physics.sphere_model import fit_sphere_model, map_cortex
from layout.sensing.candidates import Candidates
from layout.sensing.lay_out import lay_candidates
from layout.sensing.rules import PlacementRules, placement_rules

Progress = Callable[[str], None]


def silent(doing: str) -> None:
    """Progress that says nothing."""


def as_part(progress: Progress, part: str) -> Progress:
    """The same, with the part that it belongs to before what is being done."""
    return lambda doing: progress(f"{part}: {doing}")


@dataclass(frozen=True)
class Study:
    """The head of a brief with its standard positions, candidates, regions, cortex in its physical model, and rules.

    site_origin (n_sites,): for sites beside the sensors of a layout, the sensor that each comes from; sites of one
    origin share errors of pose. None: each site is its own.
    """

    brief: Brief
    head: Head
    standard: dict[str, np.ndarray]
    candidates: Candidates
    regions: tuple[Region, ...]
    cortex: CortexModel
    feasible: Feasible
    site_origin: np.ndarray | None = None

    @property
    def has_magnetometers(self) -> bool:
        """Whether the stock holds sensors of the magnetic field."""
        return any(entry.kind in HOUSED for entry in self.brief.stock)


def lay_out_study(brief: Brief, progress: Progress = silent) -> Study:
    """Head, regions, candidate sites and rules of a brief. Raises LayoutError where the brief cannot be met."""
    progress("building the head")
    head = build_head(brief.head)
    regions = tuple(select_region(head, region) for region in brief.regions)
    progress("laying the candidate sites")
    standard = standard_positions(head.scalp, head.landmarks)
    candidates = lay_candidates(head, brief, standard)
    feasible = _feasible(brief, placement_rules(head, brief, candidates, standard))
    return Study(brief, head, standard, candidates, regions, cortex_model(brief.head, head), feasible)


def cortex_model(brief: HeadBrief, head: Head) -> CortexModel:
    """The head's cortex in the physical model that the brief names; boundary elements are solved when first read."""
    conductivities = np.array(brief.conductivities)
    if brief.model == "boundary_elements":
        return BoundaryCortex(head, conductivities, brief.nodes)
    return map_cortex(fit_sphere_model(head, conductivities), head)


def _feasible(brief: Brief, rules: PlacementRules) -> Feasible:
    """The rules for the engine; InfeasibleError, naming those that clash, where they allow no layout."""
    budget = rules.budget
    feasible = Feasible(
        group=rules.group,
        counts=rules.counts,
        least=rules.least,
        sensors=rules.sensors,
        cliques=rules.cliques,
        clique_names=rules.clique_names,
        keep=rules.keep,
        rules=tuple(Rule(one.name, one.members, one.weights, one.low, one.high) for one in rules.rules),
        budget=budget and Budget(budget.price, budget.channels, budget.total, budget.block_size, budget.block_price),
        group_names=tuple(f"stock[{number}].count" for number in range(len(brief.stock))),
        checked=False,
    )
    try:
        feasible.any_set(np.zeros(feasible.n_candidates))
    except InfeasibleError:
        names = clashing_rules(feasible)
        counts = ", ".join(str(entry.count) for entry in brief.stock)
        raise InfeasibleError(
            f"stock.count: must leave room for a layout under all rules of the brief, but these cannot hold together: "
            f"{', '.join(names) or 'all of them'} (counts given: {counts})"
        ) from None
    return replace(feasible, checked=True)
