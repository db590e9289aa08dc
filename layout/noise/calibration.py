"""Strengths of background and eyes, fixed once on the nominal head, and what they imply at the scalp."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal

import numpy as np

from layout.brief.objects import NoiseBrief
from layout.noise.background import average_referenced_rms, background_columns
from layout.noise.eyes import eye_moment
from layout.physics.channels import CortexModel, electrodes_at, joined, normal_magnetometers_above
from layout.units import FT, MM, MM2, NAM, UV

if TYPE_CHECKING:
    from layout.noise.recorded_strengths import RecordedStrengths

OFF_SCALP = 20 * MM  # gap of the helmets with which magnetic brain noise was measured (Zetter et al. 2018: >= 2 cm)
ON_SCALP = 6.5 * MM
EEG_BAND = (7.0, 35.0)  # µV rms: 20-100 µV peak to peak of raw broad-band EEG; textbooks, from memory
MAGNETIC_BAND = (20.0, 40.0)  # fT/sqrt(Hz) below 20 Hz: Knuutila & Hämäläinen 1988, from memory
LARGEST_DENSITY = 2.0  # nAm/mm²: Murakami & Okada 2015, NeuroImage 111:49, 1-2; from memory
FRONTAL = ("Fp1", "Fp2")


@dataclass(frozen=True)
class Figure:
    """A number to be judged: value, low and high in `unit`, the band's limits None where there is none.

    band: the limits in words; source: what the band is of and where it is from; remark: what to know before judging.
    judged: whether a value outside the band is a weakness of this brief, not a mere comparison.
    """

    value: float
    unit: str
    band: str = ""
    low: float | None = None
    high: float | None = None
    source: str = ""
    remark: str = ""
    judged: bool = True

    @property
    def outside(self) -> Literal["", "below", "above"]:
        """On which side of its band the value lies, "" for inside or where there is no band."""
        if self.low is not None and self.value < self.low:
            return "below"
        return "above" if self.high is not None and self.value > self.high else ""


@dataclass(frozen=True)
class Calibration:
    """density [A/m]: rms moment per area of the background; eye [A·m]: rms of each eye moment component, 0 if off.

    magnetic_off and magnetic_on [T]: rms of the background along the scalp normal 20 mm and 6.5 mm above the
    calibration sites; eeg [V]: its rms at the sites against their mean, as set on the nominal head; eeg_here [V]: the
    same with the brief's own conductivities. All of a single epoch. recorded: the fit to a recording that they are
    from, None where the brief assumes them.
    """

    density: float
    eye: float
    eeg: float
    eeg_here: float
    magnetic_off: float
    magnetic_on: float
    recorded: RecordedStrengths | None = None

    def figures(self, bandwidth: float, magnetometers: bool = True) -> dict[str, Figure]:
        """label -> figure, for the tables; without magnetometers the field off the scalp is for comparison only."""
        low, high = (rate * np.sqrt(bandwidth) for rate in MAGNETIC_BAND)
        changed = self.eeg_here != self.eeg
        eeg_band = f"{EEG_BAND[0]:g}-{EEG_BAND[1]:g} µV"
        implied = {
            "background EEG implied here, rms": Figure(
                self.eeg_here / UV, "µV", eeg_band, *EEG_BAND, remark="with the brief's conductivities"
            )
        }
        figures = {
            "background EEG, rms at 10-20 sites": Figure(
                self.eeg / UV,
                "µV",
                eeg_band,
                *EEG_BAND,
                source="raw broad-band EEG, a narrow band has less (20-100 µV peak to peak; textbooks, from memory)",
                remark="set by the brief for the nominal head" if changed else "set by the brief",
            ),
            **(implied if changed else {}),
            "background field 20 mm off the scalp, rms": Figure(
                self.magnetic_off / FT,
                "fT",
                f"{low:.0f}-{high:.0f} fT",
                float(low),
                float(high),
                source=f"{MAGNETIC_BAND[0]:g}-{MAGNETIC_BAND[1]:g} fT/√Hz below 20 Hz times the root of the bandwidth, "
                "an upper estimate if the band reaches higher (Knuutila & Hämäläinen 1988, from memory)",
                remark="" if magnetometers else "for comparison, no magnetometers here",
                judged=magnetometers,
            ),
        }
        if magnetometers:
            figures["background field 6.5 mm off the scalp, rms"] = Figure(
                self.magnetic_on / FT, "fT", remark="no measured band so near the scalp"
            )
        figures["background moment density, rms"] = Figure(
            self.density * MM2 / NAM,
            "nAm/mm²",
            f"below 1-{LARGEST_DENSITY:g} nAm/mm²",
            high=LARGEST_DENSITY,
            source="largest seen in slices of cortex (Murakami & Okada 2015, NeuroImage 111:49; from memory)",
        )
        if self.eye:
            figures["eye dipole, rms of each component"] = Figure(
                self.eye / NAM, "nAm", remark="follows from the eye activity in the brief"
            )
        return figures if self.recorded is None else self.recorded.figures(figures)


def calibrate(
    cortex: CortexModel,
    nominal: np.ndarray,
    noise: NoiseBrief,
    labels: np.ndarray,
    sites: dict[str, np.ndarray],
    normals: np.ndarray,
) -> Calibration:
    """Fix the density so that the whole cortex gives `noise.eeg_rms` at the calibration sites, against their mean.

    nominal: the conductivities [S/m] with which strengths are fixed, as many as the cortex's spheres have. sites: name
    -> scalp point (3,) [m], Fp1 and Fp2 among them; normals (n_sites, 3) of the scalp there; labels (n_sources,):
    patches. Density and eye moment are held for other conductivities, where the potentials they imply differ.
    """
    usual = cortex.with_conductivities(nominal)
    points = np.array(list(sites.values()))
    electrodes = electrodes_at(points)
    coils = [normal_magnetometers_above(points, normals, gap) for gap in (OFF_SCALP, ON_SCALP)]
    whole = cortex.head.cortex.areas
    columns = background_columns(joined(electrodes, *coils), usual, labels, whole)
    potential, *fields = np.split(columns, 3)
    density = noise.eeg_rms / average_referenced_rms(potential)
    magnetic = [density * float(np.sqrt((field**2).sum(axis=1).mean())) for field in fields]
    frontal = np.isin(list(sites), FRONTAL)
    eye = 0.0
    if noise.eyes_rms > 0:
        eye = eye_moment(electrodes.eye_gain(usual), frontal, noise.eyes_rms)
    here = noise.eeg_rms
    if not np.array_equal(nominal, cortex.conductivities):
        here = density * average_referenced_rms(background_columns(electrodes, cortex, labels, whole))
    return Calibration(density, eye, noise.eeg_rms, here, *magnetic)
