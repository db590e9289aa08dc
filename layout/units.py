"""The one place where edge units (mm, µV, fT, nA·m) meet SI. Multiply to enter, divide to leave."""

import math

MM = 1e-3  # m
CM2 = 1e-4  # m²
MM2 = 1e-6  # m²
UV = 1e-6  # V
FT = 1e-15  # T
NAM = 1e-9  # A·m
FT_PER_CM = 1e-13  # T/m
DEGREE = math.pi / 180  # rad
PERCENT = 1e-2
