"""Recordings made up for the tests: a model of noise at standard positions of the sphere head, and files of it."""

from functools import cache

import edfio
import numpy as np
from studies import BAND, SPHERE, TWO_REGIONS, cups, study_of

from layout.anatomy.positions import family_names
from layout.design.problem import calibrated, patches
from layout.noise.background import background_columns
from layout.noise.eyes import eye_columns
from layout.physics.channels import electrodes_at
from layout.units import UV

NAMES = tuple(name for name in family_names("10-20") if name not in ("A1", "A2"))
SMALL_STUDY = (SPHERE, TWO_REGIONS, cups(4, 'family = "10-20"'), BAND)


@cache
def noise_parts():
    """Covariances [V²] at the assumed strengths at the 19 sites: 1 µV contacts, background, eyes; and the strengths."""
    study = study_of(*SMALL_STUDY)
    channels = electrodes_at(np.array([study.standard[name] for name in NAMES]))
    labels = patches(study)
    assumed = calibrated(study, labels)
    background = assumed.density * background_columns(channels, study.cortex, labels, study.head.cortex.areas)
    eyes = eye_columns(channels.eye_gain(study.cortex), assumed.eye)
    parts = {"contacts": UV**2 * np.eye(len(NAMES)), "background": background @ background.T, "eyes": eyes @ eyes.T}
    return parts, assumed


def covariance_of(**amplitudes):
    """Covariance [V²] at the 19 sites for amplitudes of contacts, background and eyes."""
    return sum(size**2 * noise_parts()[0][name] for name, size in amplitudes.items())


def sample_covariance(covariance, samples, rng):
    """That of `samples` independent Gaussian samples."""
    drawn = np.linalg.cholesky(covariance) @ rng.normal(size=(len(covariance), samples))
    return drawn @ drawn.T / samples


def white_recording(covariance, band, seconds, rate, rng):
    """Signals (n, n_samples) [V] white over all frequencies, whose covariance within the band is that given."""
    drawn = rng.normal(size=(len(covariance), round(seconds * rate)))
    return np.sqrt(rate / 2 / (band[1] - band[0])) * np.linalg.cholesky(covariance) @ drawn


def write_signals(path, labels, signals, rate, unit="uV", largest=3000.0):
    """An EDF or BDF file of signals (n, n_samples) [V], with a range of +-largest [unit]."""
    size = {"uV": 1e-6, "mV": 1e-3, "µV": 1e-6, "": 1e-6}[unit]
    bdf = path.suffix == ".bdf"
    signal, file = (edfio.BdfSignal, edfio.Bdf) if bdf else (edfio.EdfSignal, edfio.Edf)
    file(
        [
            signal(row / size, rate, label=label, physical_dimension=unit, physical_range=(-largest, largest))
            for label, row in zip(labels, signals, strict=True)
        ]
    ).write(path)
    return path
