"""Potentials of a dipole in layered spheres, and formulas to compare with.

mark: derived. The figures follow from the stated formulas and were computed independently of this project
(homogeneous: closed form and series; layered: 60-digit recursion). Homogeneous closed form: Brody, Terry &
Ideker 1973, IEEE TBME 20:141 (also Frank 1952, J Appl Phys 23:1225; citations from memory, formula derived).
Conductivities: 0.33 and 0.33/80 S/m after Geddes & Baker 1967 and Rush & Driscoll 1968 (memory); the set S4
after Næss et al. 2017, Front Hum Neurosci 11:490 (memory).
"""

import mpmath as mp
import numpy as np

DIPOLE_HEIGHT = 70e-3  # m, on +z
MOMENT = 10e-9  # A·m
TOLERANCE_UV = 1e-6
ANGLES = (0, 10, 20, 45, 90, 135, 180)  # degrees from +z towards +x

HOMOGENEOUS = ((90e-3,), (0.33,))
S4 = ((79e-3, 80e-3, 85e-3, 90e-3), (0.3, 1.5, 0.015, 0.3))
S4_80 = ((79e-3, 80e-3, 85e-3, 90e-3), (0.33, 1.79, 0.33 / 80, 0.33))
S3 = ((80e-3, 85e-3, 92e-3), (0.33, 0.33 / 80, 0.33))

# (model, moment axis, µV at ANGLES; None: not tabulated)
TABLE = {
    "homogeneous-z": (
        HOMOGENEOUS,
        2,
        (13.396880732, None, 2.407927713, 0.038608930, -0.308395397, -0.348775914, -0.355854644),
    ),
    "homogeneous-x": (HOMOGENEOUS, 0, (0, None, 4.331029186, 1.609812612, 0.527839042, 0.200604106, 0)),
    "S4-z": (S4, 2, (5.9548328, 4.4024967, 2.4027243, 0.3054021, -0.3073990, -0.3799489, -0.3910315)),
    "S4-x": (S4, 0, (0, 2.2810921, 2.5776161, 1.5853709, 0.5980389, 0.2274085, 0)),
    "S4-80-z": (S4_80, 2, (2.3613810, 1.9206792, 1.2731442, 0.3371569, -0.1749628, -0.2942818, -0.3183851)),
    "S3-z": (S3, 2, (2.2275191, 1.7846848, 1.1673271, 0.3195425, -0.1584339, -0.2819126, -0.3087547)),
    "S3-x": (S3, 0, (0, 0.7623763, 0.9688879, 0.8274098, 0.4477690, 0.1940299, 0)),
}


def homogeneous_closed_form(electrodes, sources, radius, conductivity):
    """Closed form (n, m, 3) [V/(A·m)]; electrodes (n, 3) on the surface, sources (m, 3) inside."""
    r, r0 = electrodes[:, None, :], sources[None, :, :]
    apart = np.linalg.norm(r - r0, axis=2, keepdims=True)
    along = np.sum(r * r0, axis=2, keepdims=True)
    image = (r + (r * along / radius - radius * r0) / (radius + apart - along / radius)) / (radius**2 * apart)
    return (2 * (r - r0) / apart**3 + image) / (4 * np.pi * conductivity)


def layered_potential(electrode, source, moment, radii, conductivities, n_terms, digits=60):
    """Potential [V] at one electrode direction, each degree's boundary conditions solved as a linear system.

    Degree n: in layer j, V = A_j r^n + B_j r^-(n+1), all lengths in units of the outer radius; B_1 is the
    dipole's. V and σ dV/dr are continuous at interfaces, dV/dr = 0 outside. Nothing is shared with the
    recursion under test.
    """
    with mp.workdps(digits):
        outer = mp.mpf(float(radii[-1]))
        rho = [mp.mpf(float(r)) / outer for r in radii]
        sigma = [mp.mpf(float(s)) for s in conductivities]
        r0 = [mp.mpf(float(v)) for v in source]
        unit = [mp.mpf(float(v)) for v in electrode]
        q = [mp.mpf(float(v)) for v in moment]
        size = mp.sqrt(sum(v * v for v in unit))
        unit = [v / size for v in unit]
        radius = mp.sqrt(sum(v * v for v in r0))
        towards = [v / radius for v in r0]
        c = sum(a * b for a, b in zip(unit, towards, strict=True))
        q_r = sum(a * b for a, b in zip(q, towards, strict=True))
        q_t = sum(a * b for a, b in zip(q, unit, strict=True)) - c * q_r
        layers = len(rho)
        total = mp.mpf(0)
        p_before, p, slope_before, slope = mp.mpf(1), c, mp.mpf(0), mp.mpf(1)
        for n in range(1, n_terms + 1):
            # unknowns A_1, A_2, B_2, ..., A_L, B_L; the dipole's part has B_1 = 1
            system, right = mp.matrix(2 * layers - 1), mp.matrix(2 * layers - 1, 1)
            row = 0
            for j in range(layers - 1):
                r = rho[j]
                for power, (grow, fall) in enumerate(
                    ((r**n, r ** -(n + 1)), (n * r ** (n - 1), -(n + 1) * r ** -(n + 2)))
                ):
                    weight_in = sigma[j] if power else 1
                    weight_out = sigma[j + 1] if power else 1
                    if j == 0:
                        system[row, 0], right[row] = weight_in * grow, -weight_in * fall
                    else:
                        system[row, 2 * j - 1], system[row, 2 * j] = weight_in * grow, weight_in * fall
                    system[row, 2 * j + 1], system[row, 2 * j + 2] = -weight_out * grow, -weight_out * fall
                    row += 1
            if layers == 1:
                system[row, 0], right[row] = n, n + 1
            else:
                system[row, 2 * layers - 3], system[row, 2 * layers - 2] = n, -(n + 1)
            solved = mp.lu_solve(system, right)
            surface = solved[0] + 1 if layers == 1 else solved[2 * layers - 3] + solved[2 * layers - 2]
            total += surface * (radius / outer) ** (n - 1) * (n * q_r * p + q_t * slope)
            p_before, p, slope_before, slope = (
                p,
                ((2 * n + 1) * c * p - n * p_before) / (n + 1),
                slope,
                slope_before + (2 * n + 1) * p,
            )
        return float(total / (4 * mp.pi * sigma[0] * outer**2))
