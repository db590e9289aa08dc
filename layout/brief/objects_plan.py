"""A plan of many cells as frozen objects in SI units: a brief, what is crossed with it, the layouts to judge."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Literal

from layout.brief.objects import Brief, HeadBrief

AS_STATED = "as stated"  # the brief's own head, by the word a plan uses

DesignedFor = Literal["cell", "brief"]
AmountBy = Literal["count", "budget"]


@dataclass(frozen=True)
class PlanHead:
    """A head by the name that the plan's tables give it."""

    name: str
    head: HeadBrief


@dataclass(frozen=True)
class PlanLayout:
    """A layout to judge in every cell: searched there ("cell") or for the brief as it is ("brief"), or given as a table
    (absolute path) or as names of sites.
    """

    name: str
    designed_for: DesignedFor | None = None
    table: Path | None = None
    sites: tuple[str, ...] | None = None


@dataclass(frozen=True)
class Plan:
    """Every combination of the lists is a cell.

    skull_factors multiply each head's skull conductivity; conductivities [S/m] replace those of every head, () leaves
    them. amounts: numbers of sensors or budgets as `by` says, () and None: as the brief has it. Factors multiply noise
    amplitudes: all, those of the sensors, those of the background. starts, proof_parts: search effort in place of the
    brief's, None leaves it.
    """

    title: str
    brief: Brief
    brief_name: str
    heads: tuple[PlanHead, ...]
    skull_factors: tuple[float, ...]
    conductivities: tuple[tuple[float, ...], ...]
    by: AmountBy | None
    amounts: tuple[float, ...]
    noise_factors: tuple[float, ...]
    sensor_factors: tuple[float, ...]
    background_factors: tuple[float, ...]
    layouts: tuple[PlanLayout, ...]
    starts: int | None
    proof_parts: int | None
    sha256: str  # of the plan file's bytes
