"""Cramér-Rao bounds of a single dipole, to compare the linearised localisation error with.

Formula (from memory): Mosher, Spencer, Leahy & Lewis 1993, Electroencephalogr Clin Neurophysiol 86:303. Signal G(r) q,
noise N(0, C): Fisher information Dᵀ C⁻¹ D, D = [∂(G q)/∂r, G]; an average reference projects out the constant; in a
sphere only the two tangential moments are seen by magnetometers. The bound scales as noise / sqrt(snapshots) and as
1/|q| for the position.

The numbers below are *derived*: computed once outside this code, from the formula, for one geometry.
"""

import numpy as np

REL_TOLERANCE = 1e-4

# 37 sensors: polar angle [deg] -> how many, at azimuths k 360/n from +x.
RINGS = {0.0: 1, 30.0: 6, 60.0: 12, 90.0: 18}
SOURCE = np.array([0.0, 0.0, 0.070])  # [m]
MOMENT = np.array([10e-9, 0.0, 0.0])  # [A·m]

# Electrodes on a homogeneous sphere, average reference; independent noise of 1 µV rms at each electrode.
ELECTRIC_RADIUS, ELECTRIC_CONDUCTIVITY, ELECTRIC_NOISE = 0.090, 0.33, 1e-6  # [m], [S/m], [V]
ELECTRIC_POSITION_SD = np.array([4.583157, 6.734683, 18.597490]) * 1e-3  # x, y, z [m]
ELECTRIC_POSITION_RSS = 20.303397e-3  # [m]
ELECTRIC_MOMENT_SD = np.array([2.133688, 1.751150, 2.214195]) * 1e-9  # x, y, z [A·m]
ELECTRIC_SIGNAL_RMS = 0.938806e-6  # [V]

# Radial magnetometers, 150 fT rms each; the radial moment is silent, so 5 unknowns.
MAGNETIC_RADIUS, MAGNETIC_NOISE = 0.0965, 150e-15  # [m], [T]
MAGNETIC_POSITION_SD = np.array([10.376160, 2.687523, 24.647197]) * 1e-3  # [m]
MAGNETIC_POSITION_RSS = 26.876975e-3  # [m]
MAGNETIC_MOMENT_SD = np.array([6.627416, 2.737200]) * 1e-9  # x, y [A·m]
MAGNETIC_SIGNAL_RMS = 90.0915e-15  # [T]

# Hochwald & Nehorai 1997, IEEE Trans Biomed Eng 44:40-50 (read): a purely radial orientation of magnetometers is not
# the best for dipoles near the centre of the array; one sensor of several components can locate a dipole.


def directions() -> np.ndarray:
    """Unit vectors of the 37 sensors (37, 3)."""
    found = []
    for polar, count in RINGS.items():
        azimuth = 2 * np.pi * np.arange(count) / count
        sine, cosine = np.sin(np.radians(polar)), np.cos(np.radians(polar))
        found.append(np.column_stack([sine * np.cos(azimuth), sine * np.sin(azimuth), np.full(count, cosine)]))
    return np.vstack(found)
