"""What is published or derived about gradiometers.

Noise of a pair: Nardelli et al. 2020, EPJ Quantum Technol 7:11 (read; authors memory): two magnetometers of
10 fT/sqrt(Hz) with uncorrelated noise give a difference of sqrt(2) x 10 fT/sqrt(Hz), baseline 20 mm.

Planar gradient above a tangential dipole q at height r0, at radius r, across the dipole (derived from Sarvas 1987): in
the plane across it B_r = µ0/(4π) q r0 sin t / a³ at polar angle t, a² = r² + r0² - 2 r r0 cos t, and straight above
B_t = -µ0/(4π) q r0 / (2 r (r - r0)²). A rigid pair of parallel coils straight above reads, per baseline,
d(B_r cos t - B_t sin t)/(r dt) = µ0/(4π) q r0 / (r (r - r0)²) (1/(r - r0) + 1/(2 r)).
"""

import numpy as np

COIL_FT_PER_RTHZ = 10.0
PAIR_FT_PER_RTHZ = np.sqrt(2.0) * COIL_FT_PER_RTHZ
PAIR_BASELINE_MM = 20.0

# Agreement of sensors' places, directions and gains that calibrations of magnetometer arrays reach: Imaging Neurosci
# 2025, imag_a_00535 (read).
CALIBRATION_MM, CALIBRATION_DEGREES, CALIBRATION_GAIN_PERCENT = 2.0, 1.2, 1.3


def slope_above(radius, height, moment):
    """Slope [T/m] of the vertical field straight above a tangential dipole [A·m], across it; lengths [m]."""
    above = radius - height
    return 1e-7 * moment * height / (radius * above**2) * (1 / above + 1 / (2 * radius))
