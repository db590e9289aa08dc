"""Numbers and names made fit for files: no NaN, fixed rounding, no control characters."""

from __future__ import annotations

import math
import unicodedata
from typing import Any

import numpy as np

SIGNIFICANT = 9  # digits kept in JSON: far below any modelling error, above the noise of summation order


def one_line(text: str) -> str:
    """`text` with every line break, tab, other control character and lone surrogate turned into a space."""
    return "".join(" " if unicodedata.category(c) in ("Cc", "Cs", "Zl", "Zp") else c for c in text).strip()


def shortened(text: str, length: int) -> str:
    """`text` on one line, cut to at most `length` characters with an ellipsis where it was cut."""
    text = one_line(text)
    return text if len(text) <= length else text[: length - 1].rstrip() + "…"


def fixed(value: float | None, digits: int, missing: str = "") -> str:
    """`value` with a fixed number of decimals, never "-0"; `missing` where it is None or not finite."""
    if value is None or not math.isfinite(value):
        return missing
    text = f"{value:.{digits}f}"
    return text.removeprefix("-") if float(text) == 0.0 else text


def rounded_up(value: float | None, digits: int, missing: str = "") -> str:
    """As `fixed`, never below `value` by more than float dust: a printed bound must still be one."""
    if value is None or not math.isfinite(value):
        return missing
    scale = 10**digits
    return fixed(math.ceil(value * scale - 1e-6) / scale, digits)


def bound_text(value: float | None, unit: str, missing: str = "") -> str:
    """A bound with three decimals that is still one: rounded up for bits, down for an error in mm."""
    if unit == "bits" or value is None or not math.isfinite(value):
        return rounded_up(value, 3, missing)
    return fixed(math.floor(value * 1000 + 1e-6) / 1000, 3)


def significant(value: float | None, digits: int, missing: str = "") -> str:
    """`value` with `digits` significant digits; `missing` where it is None or not finite."""
    if value is None or not math.isfinite(value):
        return missing
    return f"{value:.{digits}g}" if value != 0.0 else "0"


def for_json(value: Any) -> Any:
    """`value` as what JSON can carry: numpy to Python, floats to 9 significant digits, NaN and infinities to
    None.

    Strings are kept as they are: JSON escapes them. Raises TypeError for what has no place in a file.
    """
    if value is None or isinstance(value, str | bool):
        return value
    if isinstance(value, np.bool_):
        return bool(value)
    if isinstance(value, int | np.integer):
        return int(value)
    if isinstance(value, float | np.floating):
        return float(f"{value:.{SIGNIFICANT}g}") + 0.0 if math.isfinite(value) else None
    if isinstance(value, np.ndarray):
        return for_json(value.tolist())
    if isinstance(value, dict):
        return {str(key): for_json(item) for key, item in value.items()}
    if isinstance(value, tuple | list):
        return [for_json(item) for item in value]
    raise TypeError(f"no JSON form for {type(value).__name__}")
