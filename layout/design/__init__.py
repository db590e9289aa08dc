"""The pipeline, the only place that strings the packages together: brief -> study -> problem -> ranked layouts."""

from layout.design.check import examine
from layout.design.pipeline import design
from layout.design.problem import Problem, build_problem
from layout.design.study import Study, lay_out_study

__all__ = ["Problem", "Study", "build_problem", "design", "examine", "lay_out_study"]
