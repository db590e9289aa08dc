"""Regions that a starter brief can be asked for by name, and parts of the scalp for a wearable."""

from __future__ import annotations

from dataclasses import dataclass

Point = tuple[float, float, float]


@dataclass(frozen=True)
class Place:
    """A ball of cortex: centre [mm, MNI152], radius [mm]; side: which hemisphere counts."""

    name: str
    centre: Point
    radius: float
    side: str


def place_at(name: str, centre: Point, radius: float) -> Place:
    """A ball whose side follows from where it lies: both where it reaches over the midline."""
    x = centre[0]
    return Place(name, centre, radius, "both" if abs(x) < radius else "left" if x < 0 else "right")


# Rough centres [mm, MNI152] for the right hemisphere and radii [mm]; common practice, from memory: a study's own
# coordinates are better, and the questions say so.
PAIRED = {
    "hand area": ((38, -24, 56), 12),
    "face area": ((54, -8, 34), 12),
    "inferior frontal": ((50, 18, 16), 14),
    "prefrontal": ((36, 44, 24), 18),
    "superior temporal": ((58, -24, 8), 15),
    "inferior parietal": ((46, -52, 46), 15),
    "fusiform": ((40, -54, -18), 12),
}
MIDLINE = {
    "supplementary motor": ((0, -4, 62), 12),
    "foot area": ((0, -32, 68), 12),
    "primary visual": ((0, -88, 4), 15),
}
NAMED: dict[str, Place] = {
    place.name: place
    for name, ((x, y, z), radius) in PAIRED.items()
    for place in (place_at(f"left {name}", (-x, y, z), radius), place_at(f"right {name}", (x, y, z), radius))
} | {name: place_at(name, centre, radius) for name, (centre, radius) in MIDLINE.items()}

# Cortex of the template nearest to each standard position [mm, MNI152], both sides made alike.
UNDER_POSITION: dict[str, Point] = {
    "Fp1": (-17, 67, -2),
    "Fpz": (0, 66, 0),
    "Fp2": (17, 67, -2),
    "F7": (-51, 36, -6),
    "F3": (-42, 42, 27),
    "Fz": (0, 47, 47),
    "F4": (42, 42, 27),
    "F8": (51, 36, -6),
    "T7": (-67, -21, -12),
    "C3": (-54, -16, 54),
    "Cz": (0, -17, 74),
    "C4": (54, -16, 54),
    "T8": (67, -21, -12),
    "P7": (-59, -59, 3),
    "P3": (-40, -68, 48),
    "Pz": (0, -66, 62),
    "P4": (40, -68, 48),
    "P8": (59, -59, 3),
    "O1": (-22, -99, 7),
    "Oz": (0, -98, 7),
    "O2": (22, -99, 7),
}
RADIUS = 15.0  # mm of a region given by a position or by coordinates


@dataclass(frozen=True)
class ScalpPart:
    """A zone round standard positions: radius [mm], straight distance from any of them."""

    name: str
    around: tuple[str, ...]
    radius: float


WHOLE = "whole scalp"
# What may be answered -> the zones that the sensors are then held to.
WHERE: dict[str, tuple[ScalpPart, ...]] = {
    WHOLE: (),
    "forehead and ears": (
        ScalpPart("band", ("Fpz", "Fp1", "Fp2", "AF7", "AF8"), 20),
        ScalpPart("behind the ears", ("TP9", "TP10"), 20),
    ),
    "top": (ScalpPart("top", ("Cz",), 70),),
    "back": (ScalpPart("back", ("POz",), 70),),
}
