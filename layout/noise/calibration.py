"""Strengths of background and eyes, fixed once on the nominal head, and what they imply at the scalp."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from layout.anatomy.head import Head
from layout.brief.objects import NoiseBrief
from layout.noise.background import average_referenced_rms, background_columns
from layout.noise.eyes import eye_moment
from layout.physics.channels import electrodes_at, joined, normal_magnetometers_above
from layout.physics.sphere_model import SphereModel
from layout.units import FT, MM, MM2, NAM, UV

OFF_SCALP = 20 * MM  # gap of the helmets with which magnetic brain noise was measured (Zetter et al. 2018: >= 2 cm)
ON_SCALP = 6.5 * MM
EEG_BAND = "7-35 µV (20-100 µV peak to peak; textbooks, from memory)"
MAGNETIC_BAND = (20.0, 40.0)  # fT/sqrt(Hz) below 20 Hz: Knuutila & Hämäläinen 1988, from memory
DENSITY_BAND = "below 1-2 nAm/mm² (Murakami & Okada 2015, NeuroImage 111:49; from memory)"
FRONTAL = ("Fp1", "Fp2")


@dataclass(frozen=True)
class Calibration:
    """density [A/m]: rms moment per area of the background; eye [A·m]: rms of each eye moment component, 0 if off.

    magnetic_off and magnetic_on [T]: rms of the background along the scalp normal 20 mm and 6.5 mm above the
    calibration sites; eeg [V]: its rms at the sites against their mean. All of a single epoch.
    """

    density: float
    eye: float
    eeg: float
    magnetic_off: float
    magnetic_on: float

    def figures(self, bandwidth: float) -> dict[str, tuple[float, str, str]]:
        """label -> (value, unit, expected band), for the tables."""
        low, high = (rate * np.sqrt(bandwidth) for rate in MAGNETIC_BAND)
        band = (
            f"{low:.0f}-{high:.0f} fT (20-40 fT/√Hz over the band, an upper estimate above 20 Hz; "
            "Knuutila & Hämäläinen 1988, from memory)"
        )
        figures = {
            "background EEG, rms at 10-20 sites": (self.eeg / UV, "µV", EEG_BAND),
            "background field 20 mm off the scalp, rms": (self.magnetic_off / FT, "fT", band),
            "background field 6.5 mm off the scalp, rms": (self.magnetic_on / FT, "fT", ""),
            "background moment density, rms": (self.density * MM2 / NAM, "nAm/mm²", DENSITY_BAND),
        }
        if self.eye:
            figures["eye dipole, rms of each component"] = (self.eye / NAM, "nAm", "")
        return figures


def calibrate(
    head: Head,
    sphere: SphereModel,
    noise: NoiseBrief,
    labels: np.ndarray,
    sites: dict[str, np.ndarray],
    normals: np.ndarray,
) -> Calibration:
    """Fix the density so that the whole cortex gives `noise.eeg_rms` at the calibration sites, against their mean.

    sites: name -> scalp point (3,) [m], Fp1 and Fp2 among them; normals (n_sites, 3) of the scalp there; labels
    (n_sources,): patches. The density found is then held for every head and conductivity.
    """
    points = np.array(list(sites.values()))
    electrodes = electrodes_at(points)
    coils = [normal_magnetometers_above(points, normals, gap) for gap in (OFF_SCALP, ON_SCALP)]
    whole = np.zeros(len(head.cortex), dtype=bool)
    columns = background_columns(joined(electrodes, *coils), sphere, head, labels, whole)
    potential, *fields = np.split(columns, 3)
    density = noise.eeg_rms / average_referenced_rms(potential)
    magnetic = [density * float(np.sqrt((field**2).sum(axis=1).mean())) for field in fields]
    frontal = np.isin(list(sites), FRONTAL)
    eye = eye_moment(electrodes.eye_gain(sphere, head), frontal, noise.eyes_rms) if noise.eyes_rms > 0 else 0.0
    return Calibration(density, eye, noise.eeg_rms, *magnetic)
