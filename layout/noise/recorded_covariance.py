"""The covariance of a recording, on whatever channels it was made, and how many independent samples it is worth."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from layout.brief.objects import RecordingBrief
from layout.errors import BriefError, FileError
from layout.noise.electrode_labels import known_places, reference_position
from layout.units import UV

SILENT = 1e-12  # of the largest variance: an electrode that measures nothing
LEAST_SAMPLES = 20.0  # effective ones, below which no strength is worth fitting


@dataclass(frozen=True)
class RecordedCovariance:
    """A covariance (n, n) [V² or T², V T between] of n channels, and where they were.

    names: as in the brief's head where they are standard positions. positions (n, 3) [m] in the head frame; axes (n, 3)
    unit, zeros for electrodes. references: by which electrodes share an offset, "" where their labels name none.
    blocks (n_blocks, n, n): covariances of equally long stretches, None where they are not known or too few.
    samples: effective number of independent ones; seconds: of recording that they are from; band [Hz]. notes: what was
    left out, and how labels were read.
    """

    names: tuple[str, ...]
    covariance: np.ndarray
    positions: np.ndarray
    axes: np.ndarray
    references: tuple[str, ...]
    samples: float
    seconds: float
    band: tuple[float, float]
    notes: tuple[str, ...] = ()
    blocks: np.ndarray | None = None

    @property
    def is_electrode(self) -> np.ndarray:
        """Which channels are electrodes (n,) bool."""
        return ~self.axes.any(axis=1)

    @property
    def offsets(self) -> np.ndarray:
        """1 for the channels that share a reference (n, n_references)."""
        electrode = self.is_electrode
        names = sorted({one for one, is_one in zip(self.references, electrode, strict=True) if is_one})
        offsets = np.zeros((len(electrode), len(names)))
        for column, name in enumerate(names):
            offsets[:, column] = electrode & (np.array(self.references) == name)
        return offsets


def effective_samples(band: tuple[float, float], seconds: float) -> float:
    """Independent real samples in a signal of a flat spectrum: 2 x bandwidth [Hz] x seconds (Nyquist, Shannon)."""
    return 2.0 * (band[1] - band[0]) * seconds


def read_recording(
    recording: RecordingBrief, noise_band: tuple[float, float], places: dict[str, np.ndarray]
) -> RecordedCovariance:
    """The covariance in the brief's file, or of the signals in it.

    noise_band [Hz]: of the brief, which the recording's must contain. places: position name -> point (3,) [m] on the
    scalp. Raises FileError for a file that cannot be read or has too little in it, BriefError for names not in it.
    """
    from layout.noise.covariance_files import covariance_from_arrays
    from layout.noise.signal_covariance import covariance_from_signals

    if recording.file.suffix.lower() in (".npz", ".npy"):
        found = covariance_from_arrays(recording, noise_band, places)
    else:
        found = covariance_from_signals(recording, noise_band, places)
    found = _with_reference(recording, found, places)
    path = recording.file
    if found.samples < LEAST_SAMPLES:
        raise FileError(
            f"{path}: must be worth at least {LEAST_SAMPLES:g} independent samples (2 x bandwidth x seconds), but "
            f"{found.seconds:g} s in {found.band[0]:g}-{found.band[1]:g} Hz are worth {found.samples:.1f}."
        )
    low, high = found.band
    if low > noise_band[0] or high < noise_band[1]:
        raise FileError(
            f"{path}: its band must contain noise.band_hz ({noise_band[0]:g}-{noise_band[1]:g} Hz), but it is "
            f"{low:g}-{high:g} Hz."
        )
    return found


def _with_reference(
    recording: RecordingBrief, found: RecordedCovariance, standard: dict[str, np.ndarray]
) -> RecordedCovariance:
    """The covariance with the brief's reference electrode in it, whose potential against itself is 0.

    Raises FileError for an electrode that is silent and not the reference, or the reference and not silent.
    """
    places, electrode = known_places(recording, standard), found.is_electrode
    named = reference_position(recording, places)
    groups = sorted({one for one, is_one in zip(found.references, electrode, strict=True) if is_one})
    if named is not None and len(groups) != 1:
        raise BriefError(
            "noise.recording.reference: must be left out where the labels name several references or none are of "
            f"electrodes, but {recording.reference!r} was given."
        )
    variance = np.where(electrode, np.diag(found.covariance), 0.0)
    for i in np.flatnonzero(electrode):
        silent = variance[i] <= SILENT * variance.max()
        if silent and found.names[i] != named:
            raise FileError(
                f"{recording.file}: electrodes must not be silent (name a dead one in noise.recording.bad, the "
                f"reference as noise.recording.reference), but {found.names[i]} is."
            )
        if not silent and found.names[i] == named:
            raise FileError(
                f"{recording.file}: noise.recording.reference must be silent against itself, but {named} has "
                f"{np.sqrt(variance[i]) / UV:.3g} µV rms."
            )
    if named is None or named in found.names:
        return found
    return replace(
        found,
        names=(*found.names, named),
        covariance=np.pad(found.covariance, (0, 1)),
        blocks=None if found.blocks is None else np.pad(found.blocks, ((0, 0), (0, 1), (0, 1))),
        positions=np.concatenate([found.positions, places[named][None]]),
        axes=np.concatenate([found.axes, np.zeros((1, 3))]),
        references=(*found.references, *groups),
    )
