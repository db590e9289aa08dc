"""The covariance of the electrodes of an EDF or BDF file in a band, bad stretches left out.

Seconds in which an electrode is flat or at an end of its range are left out; so are those with samples beyond a limit
in the band (found behind a Butterworth filter, run forwards and backwards), and the ones beside them. All of these are
bridged by straight lines before the band is cut out of the whole by its Fourier components, so that they do not ring.

Effective samples: 2 x bandwidth x seconds for a flat spectrum. A spectrum S that is not flat is worth fewer, those of
the bandwidth (∫S)²/∫S² (Blackman & Tukey 1958, from memory), which is estimated from the recording itself and taken
where it is smaller. That is one number for all sources; slow ones, such as the eyes, are worth less. So covariances of
stretches of the recording are kept too, from which each strength gets its own interval.
"""

from __future__ import annotations

import warnings
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from scipy.fft import irfft, next_fast_len, rfft

from layout.anatomy.untrusted import one_sentence
from layout.brief.objects import RecordingBrief
from layout.errors import BriefError, FileError
from layout.noise.covariance_files import UNITS
from layout.noise.edf_header import check_edf_header
from layout.noise.electrode_labels import Electrodes, find_electrodes, known_places, reference_position
from layout.noise.recorded_covariance import RecordedCovariance, effective_samples
from layout.units import UV

MOST_NUMBERS = 64_000_000  # samples of all electrodes together: 0.5 GB as doubles
LARGEST_VOLTAGE = 10.0  # [V]
WINDOW = 1.0  # [s]
ORDER = 4
LEAST_KEPT = 0.25  # share of the seconds that must be good
BLOCK_PERIODS = 4  # of the slowest frequency of the band, in a stretch that counts as independent of the next
LEAST_BLOCKS, MOST_BLOCKS = 10, 60
OFTEN_FLAT = 0.5  # share of the seconds in which one electrode is flat, so that it must be named


@dataclass(frozen=True)
class Signals:
    """values (n, n_samples) [V] of the electrodes; idle (n, n_windows) bool: flat, or at an end of the range;
    rate [Hz].
    """

    values: np.ndarray
    idle: np.ndarray
    rate: float


def covariance_from_signals(
    recording: RecordingBrief, noise_band: tuple[float, float], standard: dict[str, np.ndarray]
) -> RecordedCovariance:
    """The covariance in the band; see `read_recording`. Raises FileError, BriefError."""
    path, band = recording.file, recording.band or noise_band
    places = known_places(recording, standard)
    electrodes, signals = _read(recording, places, band)
    idle = _idle_seconds(path, electrodes, signals.idle, reference_position(recording, places))
    length = round(WINDOW * signals.rate)
    loud = loud_windows(bridged(signals.values, idle, length), band, signals.rate, recording.largest)[: len(idle)]
    kept = ~(idle | (np.convolve(loud, np.ones(3), mode="same") > 0))
    left_out = (
        f"of {len(kept)} s, {len(kept) - int(kept.sum())} left out: {int(idle.sum())} flat or out of range, "
        f"{int(loud.sum())} beyond {recording.largest / UV:g} µV, and those beside them"
    )
    if kept.sum() < LEAST_KEPT * len(kept):
        raise FileError(f"{path}: at least {100 * LEAST_KEPT:g} % of the seconds must be good, but {left_out}.")
    values = in_band(bridged(signals.values, ~kept, length), band, signals.rate)
    good = values[:, np.flatnonzero(np.repeat(kept, length))]
    seconds = float(kept.sum() * WINDOW)
    flat = effective_samples(band, seconds)
    samples = min(flat, 2.0 * spectral_width(values, np.repeat(kept, length), signals.rate) * seconds)
    worth = (f"spectrum not flat: worth {samples:.0f} independent samples of {flat:.0f}",)
    return RecordedCovariance(
        electrodes.names,
        good @ good.T / good.shape[1],
        electrodes.positions,
        np.zeros((len(values), 3)),
        electrodes.references,
        samples,
        seconds,
        band,
        (*electrodes.notes, *(() if kept.all() else (left_out,)), *(worth if samples < 0.95 * flat else ())),
        block_covariances(good, band, signals.rate),
    )


def block_covariances(values: np.ndarray, band: tuple[float, float], rate: float) -> np.ndarray | None:
    """Covariances (n_blocks, n, n) of equally long stretches of signals (n, n_samples), each long against the memory of
    what is in the band; None where there are too few.
    """
    shortest = int(rate * max(WINDOW, BLOCK_PERIODS / band[0]))
    n_blocks = min(MOST_BLOCKS, values.shape[1] // shortest)
    if n_blocks < LEAST_BLOCKS:
        return None
    length = values.shape[1] // n_blocks
    stretches = (values[:, length * i : length * (i + 1)] for i in range(n_blocks))
    return np.stack([one @ one.T / length for one in stretches])


def _read(
    recording: RecordingBrief, places: dict[str, np.ndarray], band: tuple[float, float]
) -> tuple[Electrodes, Signals]:
    import edfio

    path = recording.file
    is_bdf = check_edf_header(path)
    with one_sentence(path, "the recording"), warnings.catch_warnings():
        warnings.simplefilter("ignore")
        file = (edfio.read_bdf if is_bdf else edfio.read_edf)(path, header_encoding="latin-1")
        signals = [(one.label, one.physical_dimension.strip(), one) for one in file.signals]
        voltage = np.array([unit in UNITS and unit.endswith("V") for _, unit, _ in signals])
        electrodes = find_electrodes(recording, [label for label, _, _ in signals], voltage, places)
        chosen = [signals[i] for i in electrodes.rows]
        rate = _common_rate(path, [(label, one.sampling_frequency) for label, _, one in chosen], band)
        n_samples = min(len(one.digital) for _, _, one in chosen)
        if n_samples * len(chosen) > MOST_NUMBERS:
            raise FileError(
                f"{path}: electrodes x samples must be at most {MOST_NUMBERS:,} (cut the recording, or name fewer "
                f"electrodes), but there are {n_samples * len(chosen):,}."
            )
        length = round(WINDOW * rate)
        n_windows = n_samples // length
        values, idle = np.empty((len(chosen), n_samples)), np.empty((len(chosen), n_windows), dtype=bool)
        for i, (_, unit, one) in enumerate(chosen):
            digital = one.digital[: n_windows * length].reshape(n_windows, length)
            ends = (one.digital_min, one.digital_max)
            idle[i] = (np.ptp(digital, axis=1) == 0) | np.isin(digital, ends).any(axis=1)
            values[i] = one.data[:n_samples] * UNITS[unit]
    if not (np.abs(values) < LARGEST_VOLTAGE).all():
        raise FileError(
            f"{path}: samples must be voltages below {LARGEST_VOLTAGE:g} V, but the ranges in its header make others."
        )
    return electrodes, Signals(values, idle, rate)


def _common_rate(path: Path, rates: list[tuple[str, float]], band: tuple[float, float]) -> float:
    rate = rates[0][1]
    odd = next((label for label, one in rates if one != rate), None)
    if odd is not None:
        raise FileError(
            f"{path}: all electrodes must be sampled alike (name the others in noise.recording.bad), but {rates[0][0]} "
            f"has {rate:g} Hz and {odd} another rate."
        )
    if band[1] >= rate / 2:
        raise BriefError(
            f"noise.recording.band_hz: must end below half the sampling rate of {path.name} ({rate / 2:g} Hz), but "
            f"{band[1]:g} Hz was given."
        )
    return rate


def _idle_seconds(path: Path, electrodes: Electrodes, idle: np.ndarray, reference: str | None) -> np.ndarray:
    """Seconds in which some electrode is idle (n_windows,) bool; the named reference is always flat and does not count.

    Raises FileError for an electrode that is idle too often to be called good.
    """
    if idle.shape[1] < 3:
        raise FileError(f"{path}: must last at least 3 s, but it has {idle.shape[1]} whole s.")
    measured = np.array([name != reference for name in electrodes.names])
    often = idle.mean(axis=1) * measured
    worst = int(np.argmax(often))
    if often[worst] > OFTEN_FLAT:
        raise FileError(
            f"{path}: electrodes must be alive in most seconds (name a dead one in noise.recording.bad, the reference "
            f"itself as noise.recording.reference), but {electrodes.names[worst]} is flat or out of range in "
            f"{100 * often[worst]:.0f} % of them."
        )
    return idle[measured].any(axis=0)


def bridged(values: np.ndarray, idle: np.ndarray, length: int) -> np.ndarray:
    """The signals (n, n_samples) with straight lines over the windows of `length` samples that idle (n_windows,)
    marks.
    """
    gone = np.zeros(values.shape[1], dtype=bool)
    gone[: len(idle) * length] = np.repeat(idle, length)
    if not gone.any() or gone.all():
        return values
    at, there = np.flatnonzero(gone), np.flatnonzero(~gone)
    whole = values.copy()
    for row in whole:
        row[at] = np.interp(at, there, row[there])
    return whole


def loud_windows(values: np.ndarray, band: tuple[float, float], rate: float, largest: float) -> np.ndarray:
    """Whole windows (n_windows,) bool in which a signal (n, n_samples) goes beyond +-largest in the band."""
    from scipy.signal import butter, sosfiltfilt

    sections = butter(ORDER, band, btype="bandpass", fs=rate, output="sos")
    length = round(WINDOW * rate)
    n_windows, padding = values.shape[1] // length, min(values.shape[1] - 1, _padding(band, rate))
    loud = np.zeros(n_windows, dtype=bool)
    for row in values:
        filtered = sosfiltfilt(sections, row - row.mean(), padlen=padding)[: n_windows * length]
        loud |= np.abs(filtered).reshape(n_windows, length).max(axis=1) > largest
    return loud


def in_band(values: np.ndarray, band: tuple[float, float], rate: float) -> np.ndarray:
    """The Fourier components in the band [Hz] of signals (n, n_samples) of sampling rate [Hz].

    Straight drifts are taken off before, and the ends are continued by their mirror images, which fade out: a jump from
    the end to the beginning would have components in every band.
    """
    from scipy.signal import detrend

    n = values.shape[1]
    padding = min(n - 1, _padding(band, rate))
    fade = np.sin(np.linspace(0, np.pi / 2, padding)) ** 2
    taper = np.concatenate([fade, np.ones(n), fade[::-1]])
    length = next_fast_len(n + 2 * padding, real=True)
    frequency = np.fft.rfftfreq(length, 1 / rate)
    outside = (frequency < band[0]) | (frequency > band[1])
    found = np.empty_like(values)
    for row, out in zip(values, found, strict=True):
        spectrum = rfft(np.pad(detrend(row), padding, mode="reflect") * taper, length)
        spectrum[outside] = 0.0
        out[:] = irfft(spectrum, length)[padding : padding + n]
    return found


def _padding(band: tuple[float, float], rate: float) -> int:
    return int(3 * rate / band[0])


def spectral_width(values: np.ndarray, kept: np.ndarray, rate: float) -> float:
    """(∫S)²/∫S² [Hz] of the mean power spectrum of signals (n, n_samples) against their mean, where kept (n_kept,)."""
    from scipy.signal import welch

    segment = min(len(kept), round(4 * rate))
    mean = values[:, : len(kept)].mean(axis=0)
    power = 0.0
    for row in values[:, : len(kept)]:
        frequency, one = welch((row - mean) * kept, fs=rate, nperseg=segment, detrend=False)
        power = power + one
    if not power.any():
        return 0.0
    return float(power.sum() ** 2 / (power**2).sum() * (frequency[1] - frequency[0]))
