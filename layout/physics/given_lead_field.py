"""A lead field computed elsewhere in the place of ours, and ours as arrays for elsewhere.

The file gives the gain of the candidates' channels to the sources of the head's cortex, matched by the channels' names
and the order of the sources: write ours, compute the same channels and sources with another model, put its gain in.
What the file cannot give stays with the quick model of spheres: the eyes' field, and the calibration of the background,
which sets its moment density by the potentials at the 10-20 sites (where the other model has another electric gain, the
EEG that follows is not the one which the brief states).
"""

from __future__ import annotations

from dataclasses import dataclass, field
from pathlib import Path

import numpy as np

from layout.brief.objects_stock import StockBrief
from layout.errors import FileError
from layout.physics.channels import Channels, candidate_channels
from layout.physics.lead_field import LeadField, PlacedPoints
from layout.physics.lead_field_files import LeadFieldArrays
from layout.physics.sphere_model import Displacements, MappedCortex, SphereModel
from layout.sensing.candidates import Candidates
from layout.units import MM

NEAR = 0.5 * MM  # how far a channel or source of the file may lie from ours
TURNED = np.radians(1.0)  # how far an axis or a normal may be turned


@dataclass(frozen=True)
class GivenChannels(Channels):
    """Channels whose gain to the whole cortex is given: (n, n_sources) along the normals or (n, n_sources, 3) free.

    They can be neither moved nor differentiated: `moved` and `on_spheres` are refused with FileError.
    """

    gain: np.ndarray = field(default_factory=lambda: np.zeros((0, 0)))
    path: Path = Path()

    def lead_field(self, cortex: MappedCortex, sources: np.ndarray, free: bool) -> LeadField:
        """The given gain to the numbered sources, along their normals or free."""
        gain = self.gain[:, sources]
        if free and gain.ndim == 2:
            raise FileError(
                f"{self.path}: gain must have the shape (n_channels, n_sources, 3) where a region is free or the head "
                f"has no normals, but {self.gain.shape} was given"
            )
        if not free and gain.ndim == 3:
            gain = np.einsum("nmk,mk->nm", gain, cortex.head.cortex.normals[sources])
        return LeadField(gain, self.displacements(cortex))

    def displacements(self, cortex: MappedCortex) -> Displacements:
        """Nothing is moved onto spheres."""
        return Displacements(0.0, 0.0, 0.0, 0.0, 0.0, 0.0)

    def moved(self, positions: np.ndarray, turns: np.ndarray, normals: np.ndarray) -> Channels:
        """Refused."""
        raise self._refusal("be left out (head.lead_field_file) where sensors are moved")

    def on_spheres(self, sphere: SphereModel, head: object) -> PlacedPoints:
        """Refused: what asks for it needs the derivatives of our own lead field."""
        raise self._refusal("be left out (head.lead_field_file) where localisation errors are wanted")

    def _refusal(self, rule: str) -> FileError:
        return FileError(f"{self.path}: must {rule}, since its gain holds at one place only, but it was given")


def channel_names(candidates: Candidates) -> tuple[str, ...]:
    """A name for each channel: that of its candidate, with its number behind where a sensor has several."""
    if candidates.pairs is not None:
        singles = channel_names(candidates.singles)
        return tuple(singles[row] for row in candidates.pairs.rows)
    counts = np.bincount(candidates.candidate_of_channel)
    names, number = [], 0
    for channel, candidate in enumerate(candidates.candidate_of_channel):
        same = channel > 0 and candidate == candidates.candidate_of_channel[channel - 1]
        number = number + 1 if same else 1
        ending = f" #{number}" if counts[candidate] > 1 else ""
        names.append(candidates.names[candidate] + ending)
    return tuple(names)


def lead_field_arrays(
    candidates: Candidates, stock: tuple[StockBrief, ...], cortex: MappedCortex, channels: Channels | None = None
) -> LeadFieldArrays:
    """The lead field of all candidates to the whole cortex, free, as arrays for `write_lead_field`.

    channels: the candidates' (default: in the quick model).
    """
    channels = channels or candidate_channels(candidates)
    sources = cortex.head.cortex
    return LeadFieldArrays(
        gain=channels.lead_field(cortex, np.arange(len(sources)), free=True).gain,
        channel_names=channel_names(candidates),
        channel_kinds=tuple(stock[kind].kind for kind in candidates.kind[candidates.candidate_of_channel]),
        channel_positions=channels.positions,
        channel_axes=channels.axes,
        source_positions=sources.positions,
        source_normals=sources.normals,
        source_areas=sources.areas,
    )


def given_channels(candidates: Candidates, cortex: MappedCortex, arrays: LeadFieldArrays, path: Path) -> GivenChannels:
    """The candidates' channels with their gain from a file's arrays.

    Raises FileError, in one sentence, where the file lacks a channel, has it as another kind, more than 0.5 mm away or
    turned by more than 1°, or where its sources are not those of the head's cortex in their order.
    """
    channels = candidate_channels(candidates)
    _check_sources(path, arrays, cortex)
    names = channel_names(candidates)
    row_of = {name: row for row, name in enumerate(arrays.channel_names)}
    lost = [name for name in names if name not in row_of]
    if lost:
        raise FileError(
            f"{path}: channel_names must hold every channel of the brief's candidates, but {len(lost)} of {len(names)} "
            f"are not there, {lost[0]!r} first"
        )
    rows = np.array([row_of[name] for name in names], dtype=int)
    electrode = np.array([kind == "electrode" for kind in arrays.channel_kinds])[rows]
    _refuse_first(path, electrode != channels.is_electrode, names, "channel_kinds must be those of the brief")
    away = np.linalg.norm(arrays.channel_positions[rows] - channels.positions, axis=1)
    _refuse_first(
        path, away > NEAR, names, "channel_positions must lie within 0.5 mm of the brief's", away / MM, "mm off"
    )
    turned = np.where(electrode, 0.0, _angles(arrays.channel_axes[rows], channels.axes))
    _refuse_first(
        path, turned > TURNED, names, "channel_axes must be within 1° of the brief's", np.degrees(turned), "° off"
    )
    shared = {name: getattr(channels, name) for name in ("positions", "axes", "is_electrode", "normals", "pickup")}
    return GivenChannels(**shared, gain=arrays.gain[rows], path=path)


def _check_sources(path: Path, arrays: LeadFieldArrays, cortex: MappedCortex) -> None:
    ours = cortex.head.cortex
    if len(arrays.source_positions) != len(ours):
        raise FileError(
            f"{path}: source_positions must be the {len(ours)} sources of the head's cortex, but "
            f"{len(arrays.source_positions)} were given"
        )
    labels = [f"source {number + 1}" for number in range(len(ours))]
    away = np.linalg.norm(arrays.source_positions - ours.positions, axis=1)
    rule = "source_positions must lie within 0.5 mm of the head's sources, in their order"
    _refuse_first(path, away > NEAR, labels, rule, away / MM, "mm off")
    if arrays.gain.ndim == 2:
        turned = _angles(arrays.source_normals, ours.normals)
        rule = "source_normals must be within 1° of the head's where gain is along them"
        _refuse_first(path, turned > TURNED, labels, rule, np.degrees(turned), "° off")


def _angles(first: np.ndarray, second: np.ndarray) -> np.ndarray:
    """Angles [rad] between vectors (n, 3)."""
    across = np.linalg.norm(np.cross(first, second), axis=1)
    return np.arctan2(across, np.einsum("nd,nd->n", first, second))


def _refuse_first(
    path: Path,
    wrong: np.ndarray,
    names: list[str] | tuple[str, ...],
    rule: str,
    values: np.ndarray | None = None,
    unit: str = "",
) -> None:
    """FileError that names the first wrong row, and how wrong it is."""
    if wrong.any():
        row = int(np.argmax(wrong))
        how = "is not" if values is None else f"is {values[row]:.3g} {unit}"
        raise FileError(f"{path}: {rule}, but {names[row]!r} {how}")
