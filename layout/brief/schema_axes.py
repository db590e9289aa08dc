"""The axes of a magnetometer as the brief writes them: a word, or a list of axes."""

from __future__ import annotations

import math
from typing import Annotated, Any, get_args

from pydantic import BeforeValidator

from layout.brief.objects_stock import Axes
from layout.brief.schema_common import broken_rule, is_number, one_of_words

Axis = tuple[float, float, float]

_LONGEST_LIST = 24
_SAME = 1e-6  # sine of the angle under which two axes are the same


def mirrored(axis: Axis) -> Axis:
    """The axis (normal, front, left) as a mirror in the median plane shows it."""
    return axis[0], axis[1], -axis[2]


def parallel(a: Axis, b: Axis) -> bool:
    """Whether two unit axes lie along one line: a sensor turned end for end measures the same but for its sign."""
    across = (a[1] * b[2] - a[2] * b[1], a[2] * b[0] - a[0] * b[2], a[0] * b[1] - a[1] * b[0])
    return math.hypot(*across) < _SAME


def _checked_axes(value: object) -> object:
    words = get_args(Axes)
    if isinstance(value, str) and value in words:
        return value
    if not isinstance(value, list):
        raise broken_rule(f"must be {one_of_words(words)}, or a list of axes, each [normal, front, left]")
    if not 1 <= len(value) <= _LONGEST_LIST:
        raise broken_rule(f"must be a list of 1 to {_LONGEST_LIST} axes")
    axes: list[Axis] = []
    for i, entry in enumerate(value):
        if not isinstance(entry, list) or len(entry) != 3 or not all(is_number(part) for part in entry):
            raise broken_rule("must be a list of three finite numbers: along the normal, to the front, to the left", i)
        largest = max(abs(part) for part in entry)
        if not 1e-6 <= largest <= 1e6:
            raise broken_rule("must have its largest component between 1e-06 and 1e+06", i)
        length = math.hypot(*entry)
        axis = tuple(part / length for part in entry)
        if any(parallel(axis, other) for other in axes):
            raise broken_rule("must not lie along an axis before it", i)
        axes.append(axis)
    return tuple(axes)


AxesValue = Annotated[Any, BeforeValidator(_checked_axes)]
