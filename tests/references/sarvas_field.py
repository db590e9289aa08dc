"""Magnetic field of a dipole in a spherical conductor: figures and formulas to compare with.

Formula: Sarvas 1987, Phys Med Biol 32:11-22 (memory; verified by Biot-Savart's radial part and by zero
divergence and curl outside). Figures, mark: derived from the closed forms in the docstrings, for 10 nA·m at
70 mm.
"""

import numpy as np

DIPOLE_HEIGHT = 70e-3  # m
MOMENT = 10e-9  # A·m
TOLERANCE_FT = 1e-6
TOLERANCE_DEG = 1e-6

# sensor radius [m] -> |B| [fT] straight above, B along -y for q along +x: µ0 q r0 / (8π r (r - r0)²)
ON_AXIS = {96.5e-3: 516.474618, 110e-3: 198.863636, 120e-3: 116.666667}
# sensor radius [m] -> (polar angle of the largest radial field in the yz-plane [deg], that field [fT])
PEAK_RADIAL = {
    96.5e-3: (12.964299, 463.798292),
    110e-3: (18.190521, 189.442687),
    120e-3: (21.628306, 115.442298),
}


def sarvas(point, source, moment):
    """B (3,) [T] at one point, as printed in the paper."""
    a = point - source
    a_len, r_len = np.linalg.norm(a), np.linalg.norm(point)
    f = a_len * (r_len * a_len + r_len**2 - source @ point)
    grad = (a_len**2 / r_len + a @ point / a_len + 2 * a_len + 2 * r_len) * point
    grad -= (a_len + 2 * r_len + a @ point / a_len) * source
    cross = np.cross(moment, source)
    return 1e-7 / f**2 * (f * cross - (cross @ point) * grad)


def primary_field(point, source, moment):
    """B (3,) [T] of the primary current alone (Biot-Savart)."""
    a = point - source
    return 1e-7 * np.cross(moment, a) / np.linalg.norm(a) ** 3
