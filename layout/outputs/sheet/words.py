"""Directions along the scalp in plain words (front, back, left, right, up and down of the wearer), and room to err."""

from __future__ import annotations

import numpy as np

from layout.evidence.tolerance import LEVELS
from layout.outputs.placement_tables import Room
from layout.outputs.plain import fixed
from layout.units import DEGREE, MM, PERCENT

ROOM_LEVEL = 0.01  # of the value: at 5 % most sensors may sit anywhere that was tried
ROOM_PERCENT = f"{ROOM_LEVEL / PERCENT:g} %"
_WORDS = (("left", "right"), ("back", "front"), ("down", "up"))  # along -x, x; -y, y; -z, z
UPRIGHT = 10 * DEGREE  # an axis nearer to the normal than this counts as straight out of the head
FLAT = 80 * DEGREE  # and one farther than this as along the scalp


def offset_words(normal: np.ndarray, way: np.ndarray, length: float) -> str:
    """Where `way` (3,) leads along the scalp of this outward normal (3,), as "6 mm front, 3 mm right".

    The way is laid flat and given its `length` [m] along the scalp. Parts under half a millimetre are left out: ""
    where both are.
    """
    parts = [(size, word) for size, word in _parts(normal, way, length) if fixed(size / MM, 0) != "0"]
    return ", ".join(f"{fixed(size / MM, 0)} mm {word}" for size, word in parts)


def direction_words(normal: np.ndarray, way: np.ndarray) -> str:
    """The direction of `way` (3,) along the scalp, as "to the front, 20° to the left"."""
    (first, word), (second, aside) = _parts(normal, way, 1.0)
    turn = fixed(np.arctan2(second, first) / DEGREE, 0)
    return _to(word) if turn in ("0", "1", "2") else f"{_to(word)}, {turn}° {_to(aside)}"


def axis_words(normal: np.ndarray, axis: np.ndarray) -> str:
    """A sensitive axis (3,) against the scalp's outward normal (3,)."""
    upright = float(np.clip(normal @ axis, -1.0, 1.0))
    lean = np.arccos(abs(upright))
    if lean < UPRIGHT:
        return "straight out"
    outward = axis if upright > 0 or lean > FLAT else -axis
    if lean > FLAT:
        return f"flat, {direction_words(normal, outward)}"
    return f"{fixed(lean / DEGREE, 0)}° from straight out, leaning {direction_words(normal, outward)}"


def _to(word: str) -> str:
    return word if word in ("up", "down") else f"to the {word}"


def _parts(normal: np.ndarray, way: np.ndarray, length: float) -> list[tuple[float, str]]:
    """(size, word) of a way along the two of the head's axes that lie flattest on the scalp, the larger first."""
    flattest, flat = np.argsort(np.abs(np.round(normal, 9)), kind="stable")[:2]
    first = np.eye(3)[flattest] - normal[flattest] * normal
    first /= np.linalg.norm(first)
    second = np.cross(normal, first)
    second *= 1.0 if second[flat] >= 0 else -1.0
    along = np.array([way @ first, way @ second])
    along *= length / max(float(np.linalg.norm(along)), 1e-12)
    named = [
        (abs(float(size)), _WORDS[axis][int(size > 0)]) for size, axis in zip(along, (flattest, flat), strict=True)
    ]
    return sorted(named, key=lambda part: -part[0])


def room_at(room: Room | None, unit: float) -> str:
    """How far a sensor may be off before the value drops by ROOM_LEVEL, in the worst direction, in `unit`: one decimal,
    ">20" where not within what was tried, "" where there is none.
    """
    if room is None:
        return ""
    worst = room.worst[LEVELS.index(ROOM_LEVEL)]
    return fixed(worst / unit, 1) if np.isfinite(worst) else f">{fixed(room.tried / unit, 0)}"
