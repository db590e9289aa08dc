"""The strengths of a brief's noise, fitted to a recording, beside what the brief assumes."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

from layout import __version__
from layout.brief.objects import Brief, ElectrodeBrief, RecordingBrief
from layout.brief.schema_recording import COVARIANCE_FILES, SIGNAL_FILES
from layout.design.noise_lines import brief_lines
from layout.design.problem import calibrated, patches
from layout.design.study import Progress, Study, lay_out_study, silent
from layout.errors import BriefError
from layout.noise.calibration import Calibration
from layout.noise.recorded_covariance import effective_samples
from layout.noise.recorded_strengths import (
    BACKGROUND,
    CONTACTS,
    EYES,
    FIELD,
    GRADIENTS,
    MAGNETOMETERS,
    RecordedStrengths,
)
from layout.outputs.noise_tables import NoiseFit, NoiseStrength
from layout.units import FT, FT_PER_CM, MM2, NAM, UV


def fit_noise(brief: Brief, recording: Path | None = None, progress: Progress = silent) -> NoiseFit:
    """Fit the strengths of the brief's noise to its recording, or to that in another file.

    Raises BriefError where there is no recording, FileError for one that cannot be used.
    """
    asked = brief if recording is None else _with_file(brief, recording)
    if asked.noise.recording is None:
        raise BriefError(
            "noise.recording: must name a file, or --recording must, where noise is to be fitted, but the brief has "
            "no [noise.recording]"
        )
    study = lay_out_study(asked, progress)
    progress("background activity")
    calibration = calibrated(study, patches(study))
    recorded = calibration.recorded
    fit = recorded.fit
    return NoiseFit(
        title=brief.title,
        sha256=brief.sha256,
        version=__version__,
        file=recorded.file,
        electrodes=recorded.electrodes,
        magnetometers=recorded.magnetometers,
        seconds=recorded.seconds,
        band=recorded.band,
        samples=fit.samples,
        samples_if_flat=effective_samples(recorded.band, recorded.seconds),
        blocks=recorded.blocks,
        deviance=fit.deviance,
        freedom=fit.freedom,
        probability=fit.probability,
        variance_residual=fit.variance_residual,
        goodness=recorded.goodness,
        strengths=_strengths(study, calibration),
        notes=_notes(study, recorded),
        lines=brief_lines(asked, calibration),
    )


def _with_file(brief: Brief, file: Path) -> Brief:
    """The brief with another file in place of its recording's."""
    if file.suffix.lower() not in (*SIGNAL_FILES, *COVARIANCE_FILES):
        endings = ", ".join((*SIGNAL_FILES, *COVARIANCE_FILES))
        raise BriefError(f"the recording must be a file that ends in {endings}, but {str(file)!r} was given")
    said = brief.noise.recording or RecordingBrief(file)
    return replace(brief, noise=replace(brief.noise, recording=replace(said, file=file.absolute())))


def _strengths(study: Study, calibration: Calibration) -> tuple[NoiseStrength, ...]:
    """All strengths of the brief's noise, those that the recording tells first."""
    brief, recorded = study.brief, calibration.recorded
    noise, entries = brief.noise, {entry.name: entry for entry in brief.stock}

    def one(name: str, what: str, key: str, unit: str, assumed: float | None, per_amplitude: float, entry: str = ""):
        strength = recorded.fit.strengths[name]
        low, high = strength.low * per_amplitude, strength.high * per_amplitude
        told = strength.status != "absent"
        value = strength.amplitude * per_amplitude
        ends = (low, high) if told else (None, None)
        return NoiseStrength(what, key, entry, unit, assumed, value, *ends, strength.status)

    found = []
    for name, what, key, unit, si in (
        (CONTACTS, "contact noise", "contact_noise_uv", "µV", UV),
        (MAGNETOMETERS, "magnetometers' own noise", "noise_ft_per_rthz", "fT/√Hz", FT),
    ):
        if name in recorded.size:
            entry, size = recorded.stock.get(name, ""), recorded.size[name] / si
            found.append(one(name, what, f"stock.{key}" if entry else "", unit, size if entry else None, size, entry))
    eeg = noise.eeg_rms / UV
    found.append(
        one(BACKGROUND, "background EEG at 10-20 sites", "noise.background.eeg_uv_rms", "µV", eeg, eeg),
    )
    density = recorded.size[BACKGROUND] * MM2 / NAM
    found.append(one(BACKGROUND, "its moment density", "", "nAm/mm²", density, density))
    brain = recorded.fit.strengths[BACKGROUND].amplitude
    if study.has_magnetometers and brain > 0:
        field = calibration.magnetic_on / brain / FT
        found.append(one(BACKGROUND, "its field 6.5 mm off the scalp", "", "fT", field, field))
    if EYES in recorded.size:
        eyes = noise.eyes_rms / UV
        found.append(one(EYES, "eyes, at Fp1 and Fp2", "noise.eyes.uv_rms", "µV", eyes, eyes))
    for name, what, key, unit, si, assumed in (
        (FIELD, "field from outside", "field_ft_rms", "fT", FT, noise.field_rms),
        (GRADIENTS, "gradients from outside", "gradient_ft_per_cm_rms", "fT/cm", FT_PER_CM, noise.gradient_rms),
    ):
        key = f"noise.surroundings.{key}"
        if name in recorded.size:
            found.append(one(name, what, key, unit, assumed / si, recorded.size[name] / si))
        elif study.has_magnetometers:
            found.append(_unrecorded(what, key, unit, assumed / si))
    for name in recorded.silent_about:
        entry = entries[name]
        if isinstance(entry, ElectrodeBrief):
            found.append(_unrecorded("contact noise", "stock.contact_noise_uv", "µV", entry.contact_noise / UV, name))
        else:
            size = entry.noise_density / FT
            found.append(_unrecorded("own noise", "stock.noise_ft_per_rthz", "fT/√Hz", size, name))
    return tuple(found)


def _unrecorded(what: str, key: str, unit: str, assumed: float, entry: str = "") -> NoiseStrength:
    return NoiseStrength(what, key, entry, unit, assumed, assumed, None, None, "not recorded")


def _notes(study: Study, recorded: RecordedStrengths) -> tuple[str, ...]:
    notes = []
    if study.brief.noise.recording.file.suffix.lower() in COVARIANCE_FILES:
        notes.append(
            "Of a covariance the number of independent samples is taken as 2 x bandwidth x seconds, which holds for a "
            "flat spectrum: where it is not flat the number is too large and the intervals are too narrow."
        )
    elif recorded.blocks:
        notes.append(
            f"The intervals are from how {recorded.blocks} stretches of the recording differ, so they do not lean on "
            "the number of independent samples."
        )
    else:
        notes.append(
            "The recording is too short to compare stretches of it, so the intervals lean on the number of independent "
            "samples, one for all sources: those of slow ones, such as the eyes, may be too narrow."
        )
    notes += recorded.untold
    if study.has_magnetometers and not recorded.magnetometers:
        notes.append(
            "What electrodes tell of the brain's background reaches magnetometers through the model alone: its skull "
            "and the size of its patches are assumptions."
        )
    notes += [f"In {recorded.file}: {remark}." for remark in recorded.remarks]
    return tuple(notes)
