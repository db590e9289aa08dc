"""Which channels of a recording are electrodes at known positions, from their labels."""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from layout.anatomy.positions import OLD_NAMES
from layout.brief.objects import RecordingBrief
from layout.errors import BriefError, FileError
from layout.sensing.electrodes_file import read_electrodes
from layout.sensing.names import near_names

_TYPE = re.compile(r"^(EEG|POL)[ _-]+(?=\S)", re.IGNORECASE)  # signal types that recorders write before the position
_LEAST = 3  # electrodes of one reference: two contrasts
_SHOWN = 12  # names in a sentence


@dataclass(frozen=True)
class Electrodes:
    """Channels of a recording at known positions. rows (n,): their numbers in it; names; positions (n, 3) [m];
    references: what their labels name as such, "" where nothing; notes: what was left out or read as something else.
    """

    rows: np.ndarray
    names: tuple[str, ...]
    positions: np.ndarray
    references: tuple[str, ...]
    notes: tuple[str, ...]


class ReadLabel(NamedTuple):
    """The known position that a label names, the reference behind its dash ("": none), the position as written."""

    position: str
    reference: str
    written: str


def read_label(label: str, known: dict[str, str]) -> ReadLabel | None:
    """What a label names, None where that is no known position.

    known: lower-case name -> name. A type in front (EEG), dots that pad a label, the case of letters and the old names
    T3 to T6 are seen through: "EEG FP1-REF" is Fp1 against REF.
    """
    bare = _TYPE.sub("", label.strip()).strip()
    first, _, second = bare.partition("-")
    for text, reference in ((label.strip(), ""), (bare, ""), (first, second)):
        text = text.strip().rstrip(".")
        for name in (text, OLD_NAMES.get(text.upper(), "")):
            if name.lower() in known:
                return ReadLabel(known[name.lower()], reference.strip().upper(), text)
    return None


def known_places(recording: RecordingBrief, standard: dict[str, np.ndarray]) -> dict[str, np.ndarray]:
    """Position name -> point (3,) [m]: standard positions, and those of the brief's table, which win."""
    if recording.electrodes_tsv is None:
        return standard
    listed = dict(zip(*read_electrodes(recording.electrodes_tsv), strict=True))
    taken = {name.lower() for name in listed}
    return {name: point for name, point in standard.items() if name.lower() not in taken} | listed


def reference_position(recording: RecordingBrief, places: dict[str, np.ndarray]) -> str | None:
    """The position of the brief's reference electrode, None where it names none; BriefError for an unknown one."""
    if recording.reference is None:
        return None
    read = read_label(recording.reference, {name.lower(): name for name in places})
    if read is None:
        near = near_names(recording.reference, tuple(places))
        raise BriefError(
            f"noise.recording.reference: must be a known position, but {recording.reference!r} was given{near}."
        )
    return read.position


def find_electrodes(
    recording: RecordingBrief, labels: list[str], usable: np.ndarray, places: dict[str, np.ndarray]
) -> Electrodes:
    """The electrodes among a recording's channels, the brief's bad ones left out.

    usable (n,) bool: whether a channel is a voltage at all. places: as `known_places` gives them. Raises BriefError for
    a bad channel that is not there, FileError where a position comes twice or too few electrodes remain.
    """
    path = recording.file
    known = {name.lower(): name for name in places}
    read = [read_label(label, known) if good else None for label, good in zip(labels, usable, strict=True)]
    bad = _bad_rows(recording, labels, read, known)
    kept = [i for i, one in enumerate(read) if one is not None and i not in bad]
    references = [read[i].reference for i in kept]
    alone = [i for i, one in zip(kept, references, strict=True) if references.count(one) == 1]
    kept = [i for i in kept if i not in alone]
    names = [read[i].position for i in kept]
    repeated = next((name for name in names if names.count(name) > 1), None)
    if repeated is not None:
        both = ", ".join(labels[i] for i, name in zip(kept, names, strict=True) if name == repeated)
        raise FileError(
            f"{path}: must hold each position once (name the others in noise.recording.bad), but {both} are all "
            f"{repeated}."
        )
    if len(kept) < _LEAST:
        raise FileError(
            f"{path}: must hold at least {_LEAST} good electrodes of one reference at known positions, but there are "
            f"{len(kept)} (its channels: {_listed(labels)})."
        )
    left = [labels[i].strip() for i, one in enumerate(read) if one is None and i not in bad]
    renamed = [
        f"{read[i].written} as {read[i].position}" for i in kept if read[i].written.upper() != read[i].position.upper()
    ]
    groups = sorted({read[i].reference for i in kept} - {""})
    told = (
        ("bad, as the brief says", [labels[i].strip() for i in sorted(bad)]),
        ("left out, of no known position or no voltage", left),
        ("left out, alone in their reference", [labels[i].strip() for i in alone]),
        ("old names read", renamed),
        ("references named in labels", groups),
    )
    return Electrodes(
        np.array(kept),
        tuple(names),
        np.array([places[name] for name in names]),
        tuple(read[i].reference for i in kept),
        tuple(f"{what}: {_listed(which)}" for what, which in told if which),
    )


def _bad_rows(
    recording: RecordingBrief, labels: list[str], read: list[ReadLabel | None], known: dict[str, str]
) -> set[int]:
    """Numbers of the channels that `bad` names, by label or by position."""
    rows = set()
    for name in recording.bad:
        meant = read_label(name, known)
        here = [
            i
            for i, label in enumerate(labels)
            if label.strip().lower() == name.lower() or (meant and read[i] and read[i].position == meant.position)
        ]
        if not here:
            raise BriefError(
                f"noise.recording.bad: must name channels of {recording.file.name}, but {name!r} was given"
                f"{near_names(name, [label.strip() for label in labels])}."
            )
        rows.update(here)
    return rows


def _listed(names: list[str]) -> str:
    text = ", ".join("".join(c if c.isprintable() else " " for c in name) for name in names[:_SHOWN])
    return text + (f" and {len(names) - _SHOWN} more" if len(names) > _SHOWN else "")
