"""Numbers and names as files need them."""

import json
import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from layout.outputs.plain import bound_text, fixed, for_json, one_line, rounded_up, shortened, significant

floats = st.floats(-1e6, 1e6)


@given(st.text(max_size=40))
def test_one_line_has_nothing_that_breaks_a_table_or_a_terminal(text):
    line = one_line(text)
    assert len(line.splitlines()) <= 1
    assert line.isprintable() or not any(ord(c) < 32 or 127 <= ord(c) < 160 for c in line)
    assert "\t" not in line and "\x1b" not in line  # noqa: PT018
    line.encode("utf-8")


@given(st.text(max_size=60), st.integers(2, 30))
def test_shortened_fits(text, length):
    assert len(shortened(text, length)) <= length


@given(floats, st.integers(0, 4))
def test_a_printed_bound_is_still_a_bound(value, digits):
    printed = float(rounded_up(value, digits))
    dust = 2e-6 * 10.0**-digits + 1e-9 * abs(value)
    assert value - dust <= printed <= value + 10.0**-digits + dust


def test_rounded_up_known():
    assert rounded_up(10.3381, 3) == "10.339"
    assert rounded_up(0.1000001, 2) == "0.11"
    assert rounded_up(0.1, 2) == "0.10"  # 0.1 * 100 is exact enough to stay
    assert rounded_up(math.nan, 2, "-") == "-"


def test_fixed_and_significant_known():
    assert fixed(-0.0001, 2) == "0.00"
    assert fixed(-1.005, 1) == "-1.0"
    assert fixed(None, 1, "n/a") == "n/a"
    assert fixed(math.inf, 1) == ""
    assert significant(-0.0, 4) == "0"
    assert significant(1234.5678, 6) == "1234.57"


def test_for_json_knows_no_nan():
    value = {
        "a": np.array([1.0, np.nan, -np.inf]),
        "b": (np.int64(3), np.float64(1 / 3), np.bool_(True), -0.0),
    }
    assert for_json(value) == {"a": [1.0, None, None], "b": [3, 0.333333333, True, 0.0]}
    assert json.dumps(for_json(value), allow_nan=False).endswith("0.333333333, true, 0.0]}")


def test_for_json_refuses_what_it_does_not_know():
    with pytest.raises(TypeError, match="set"):
        for_json({1, 2})


@pytest.mark.parametrize(("value", "unit", "text"), [(1.00011, "bits", "1.001"), (1.00099, "mm", "1.000")])
def test_a_printed_bound_is_still_one(value, unit, text):
    assert bound_text(value, unit) == text
    assert bound_text(None, unit, "-") == bound_text(float("nan"), unit, "-") == "-"
