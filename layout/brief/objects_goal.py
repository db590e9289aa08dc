"""The goal of a brief, the scenarios it is judged under, its budget and the effort of the search."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Literal

GoalKind = Literal["information", "localisation"]
ErrorOver = Literal["rms", "worst"]
Judge = Literal["mean", "worst"]


@dataclass(frozen=True)
class GoalBrief:
    """What a layout is judged by.

    region_weights: by region name; empty: information is joint and unweighted, and errors are averaged over all
    sources alike. With weights, the goal is the weighted sum of the regions' informations (each with the others as
    nuisance), or the root of the weighted mean of their mean squared errors. error_over: rms or worst of the
    linearised errors.
    position_prior [m] per axis and moment_spread (a fraction of the region's moment) are the priors of these errors.
    error_limits: region name -> the most its error may be [m]. reach_bits, reach_error [m]: the smallest count that
    reaches the target is wanted; the stock's count is then the most.
    """

    kind: GoalKind = "information"
    region_weights: dict[str, float] = field(default_factory=dict)
    error_over: ErrorOver = "rms"
    position_prior: float = 30e-3
    moment_spread: float = 1.0
    error_limits: dict[str, float] = field(default_factory=dict)
    reach_bits: float | None = None
    reach_error: float | None = None

    @property
    def has_target(self) -> bool:
        """Whether the smallest count that reaches a target is wanted."""
        return self.reach_bits is not None or self.reach_error is not None


@dataclass(frozen=True)
class ScenariosBrief:
    """Under what else than the brief's own head and noise a layout is judged.

    The brief's own case is always the first scenario; each entry of the lists is one more, changed in this alone.
    conductivities [S/m]: one set per scenario, from the brain outwards. heads: sizes of the survey, by name; the
    template takes each in turn, caps move with the head and helmets do not. Factors multiply noise amplitudes: all,
    those of the sensors themselves, those of the background. pose_error [m] and pose_tilt [rad]: standard deviations of
    a random displacement along each of the two tangents of the scalp and of a random tilt about each of them, drawn
    independently for every site pose_draws times (seeded by the search's seed), each draw one scenario. any_one_lost:
    the goal is the worst over the loss of any one sensor, within every scenario.
    """

    judge: Judge = "mean"
    conductivities: tuple[tuple[float, ...], ...] = ()
    heads: tuple[str, ...] = ()
    noise_factors: tuple[float, ...] = ()
    sensor_noise_factors: tuple[float, ...] = ()
    background_factors: tuple[float, ...] = ()
    pose_error: float = 0.0
    pose_tilt: float = 0.0
    pose_draws: int = 8
    any_one_lost: bool = False

    @property
    def poses(self) -> int:
        """How many scenarios the random pose errors make."""
        return self.pose_draws if self.pose_error > 0 or self.pose_tilt > 0 else 0


@dataclass(frozen=True)
class BudgetBrief:
    """What a layout may cost in all: its sensors, its channels and the started blocks of amplifier channels.

    The reference contact is one of the channels; the ground is none. block_channels None: channels come singly.
    """

    total: float
    block_channels: int | None = None
    block_price: float = 0.0


@dataclass(frozen=True)
class SearchBrief:
    """Effort: seeded starts and number of ranked layouts.

    differ_by: sensors by which the ranks differ at least (0: chosen from the count). proof_parts: parts of the tree
    that branch and bound may examine to narrow a layout's gap (None: as many as take some ten seconds for the goal);
    proof_ranks: how many ranks it works on. polish: slide the sensors along the scalp after the search.
    """

    seed: int = 1
    starts: int = 20
    ranked: int = 3
    differ_by: int = 0
    proof_parts: int | None = None
    time_allowance: float | None = None  # [s]; None: no clock
    proof_ranks: int = 1
    polish: bool = False
