"""Choosing and certifying sets of candidates: arrays in, arrays out; knows nothing of heads."""

from layout.engine.combined import WeightedSum, Worst
from layout.engine.combined_limits import Limited
from layout.engine.combined_loss import AnyOneLost
from layout.engine.feasible import Feasible
from layout.engine.free_axes import FreeAxes, rank_free_axes
from layout.engine.information_goal import InformationGoal
from layout.engine.localisation import LocalisationGoal, LocalisationModel
from layout.engine.model import LinearModel
from layout.engine.ranking import rank_layouts
from layout.engine.rules import Budget, Rule
from layout.engine.smallest import smallest_count

__all__ = [
    "AnyOneLost",
    "Budget",
    "Feasible",
    "FreeAxes",
    "InformationGoal",
    "Limited",
    "LinearModel",
    "LocalisationGoal",
    "LocalisationModel",
    "Rule",
    "WeightedSum",
    "Worst",
    "rank_free_axes",
    "rank_layouts",
    "smallest_count",
]
