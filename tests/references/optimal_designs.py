"""Optimal designs with known values, to compare search and bound with.

Mark of every value, unless its line says otherwise: derived (checked by the equivalence theorem on a fine grid, by
closed form or by brute force, outside this code); attributions are from memory.
"""

import numpy as np

# Kiefer & Wolfowitz 1960, Canad J Math 12:363: a design is D-optimal if and only if the largest variance
# fᵀ M⁻¹ f over all points equals the number of parameters p, and then it is reached on the support;
# log det M* - log det M <= largest variance - p for every design.

# Degree of the polynomial on [-1, 1] -> (support, det M of the monomials); equal weights. Hoel 1958, Guest 1958
# (Ann Math Statist 29): the support are the zeros of (1 - x²) P'_d(x).
D_POLYNOMIAL = {
    1: ([-1.0, 1.0], 1.0),
    2: ([-1.0, 0.0, 1.0], 4 / 27),
    3: ([-1.0, -np.sqrt(1 / 5), np.sqrt(1 / 5), 1.0], 0.00512),
    4: ([-1.0, -np.sqrt(3 / 7), 0.0, np.sqrt(3 / 7), 1.0], 4.297218239e-5),
}
D_POLYNOMIAL_REL_TOLERANCE = 1e-5  # the printed digits allow 1e-9; the ascent stops at a relative gap

# D-efficiency of the quadratic's D-optimal design in the linear model; "82 %" read.
EFFICIENCY_OF_QUADRATIC_IN_LINEAR = np.sqrt(2 / 3)

# Degree -> n * variance of the highest coefficient, 2^(2(d-1)). Support: Chebyshev points cos(j pi / d), weights
# 1/(2d) at the ends and 1/d inside (Kiefer & Wolfowitz 1959, Ann Math Statist 30:271).
HIGHEST_COEFFICIENT_VARIANCE = {1: 1.0, 2: 4.0, 3: 16.0, 4: 64.0}

# Unit regressors in R³: a tight frame gives M = I/3, det 1/27.
VECTOR_SENSOR_DET = 1 / 27

# Two-level main effects, n = 4k runs: XᵀX = nI, det = n^p. Hadamard; Plackett & Burman 1946, Biometrika 33:305.
MAIN_EFFECTS_RUNS = 8
MAIN_EFFECTS_DET = 8**8  # intercept and 7 factors

# Largest |det| of n x n matrices of ±1 (chemical balance). 2..5: brute force; 6..8: memory.
CHEMICAL_BALANCE_DET = {2: 2, 3: 4, 4: 16, 5: 48, 6: 160, 7: 576, 8: 4096}

# Largest |det| of n x n matrices of 0/1 (spring balance). 2..5: brute force; 6, 7: memory.
SPRING_BALANCE_DET = {2: 1, 3: 2, 4: 3, 5: 5, 6: 9, 7: 32}

# Runs N -> det XᵀX of the best allocation of N runs of the quadratic to {-1, 0, 1}: 4 n1 n2 n3, as equal as possible.
EXACT_QUADRATIC_DET = {3: 4, 4: 8, 5: 16, 6: 32, 7: 48, 8: 72, 9: 108}
