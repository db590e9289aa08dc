"""A recording from which a brief takes the strengths of its noise."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path


@dataclass(frozen=True)
class RecordingBrief:
    """The file (absolute: .edf, .bdf, .npz, .npy) and what is to be known about it.

    bad: channels to leave out. band [Hz]: None for that of the noise. reference: the electrode that the others were
    measured against, which joins them as one of no variance; None leaves it out. electrodes_tsv: positions of the
    electrodes, where they are not the standard ones. largest [V]: in the band, beyond which seconds are left out.
    sensors: entries of the stock that are like the recorded sensors; None for the first of each kind. channels, unit,
    seconds: of a covariance whose file does not say so.
    """

    file: Path
    bad: tuple[str, ...] = ()
    band: tuple[float, float] | None = None
    reference: str | None = None
    electrodes_tsv: Path | None = None
    largest: float = 250e-6
    sensors: tuple[str, ...] | None = None
    channels: tuple[str, ...] | None = None
    unit: str | None = None
    seconds: float | None = None
