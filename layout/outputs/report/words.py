"""Sentences of the report alone: what its numbers do not say, and how to get what is not in it."""

from __future__ import annotations

from layout.outputs.result import DesignResult

NO_ROOM = (
    "Not worked out here: `layout placement BRIEF` gives each sensor's tolerance and substitutes, unless a given lead "
    "field ties the sensors to their places."
)
NO_CURVE = "Not worked out here: `layout curve BRIEF` gives value and bound against the number of sensors."
NO_NOISE = "Not worked out in this run: the figures of noise below hold for all layouts."
LIMITS = (
    "The bound speaks of the listed candidates under this model; a place, an axis or a head that is not among them may "
    "do better or worse.",
    "The strengths of regions, background and sensors are what the brief states or the tool assumes; a pilot recording "
    "tells more than any default.",
    "The worth of a sensor is what is lost when it alone is left out: sensors that share information each look small, "
    "and worths do not add up to the value.",
)
LIMITS_BY_UNIT = {
    "bits": (
        "Bits say how well the regions' activity can be told from noise; they do not say that a given analysis "
        "will get there.",
    ),
    "mm": (
        "The error is linearised about the true place: at low signal-to-noise ratio real localisation is worse, "
        "and `layout simulate` shows from where on.",
    ),
}
LIMITS_OF_ROOM = (
    "Tolerances move one sensor at a time, the others staying; several misplaced at once cost more.",
    "Sensitivity is to a single dipole along the cortex's normal and leaves open which of two places it came from.",
)


def limits_of(result: DesignResult) -> tuple[str, ...]:
    """What to keep in mind when reading the report's numbers, one sentence each."""
    return LIMITS + LIMITS_BY_UNIT[result.unit] + (LIMITS_OF_ROOM if result.evidence is not None else ())
