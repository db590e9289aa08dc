"""A linear or integer programme loaded into the HiGHS solver: silent, on one thread, the same answer every time."""

from __future__ import annotations

import highspy
import numpy as np
from scipy import sparse

OPTIMAL, INFEASIBLE = highspy.HighsModelStatus.kOptimal, highspy.HighsModelStatus.kInfeasible


def loaded(
    matrix: sparse.csr_array, low: np.ndarray, high: np.ndarray, lower: np.ndarray, upper: np.ndarray
) -> highspy.Highs:
    """The solver holding low <= matrix @ v <= high, lower <= v <= upper, with costs of zero (to be minimised)."""
    solver = highspy.Highs()
    for option, value in {"output_flag": False, "parallel": "off"}.items():
        solver.setOptionValue(option, value)
    model = highspy.HighsLp()
    model.num_row_, model.num_col_ = matrix.shape
    model.col_cost_ = np.zeros(matrix.shape[1])
    model.col_lower_, model.col_upper_ = lower, upper
    model.row_lower_, model.row_upper_ = low, high
    model.a_matrix_.format_ = highspy.MatrixFormat.kRowwise
    model.a_matrix_.start_, model.a_matrix_.index_ = matrix.indptr, matrix.indices
    model.a_matrix_.value_ = matrix.data
    solver.passModel(model)
    return solver


def set_prices(solver: highspy.Highs, price: np.ndarray) -> None:
    """Make the solver look for the largest price · v."""
    solver.changeColsCost(len(price), np.arange(len(price), dtype=np.int32), -price)
