"""ranking.json: keys, numbers, same bytes."""

import dataclasses
import json
import math

import numpy as np
from made_result import HOSTILE_NAME, HOSTILE_TITLE, make_result

from layout.outputs.ranking import ranking_json

# issue text: "ranking.json keys at least"
TOP_KEYS = {"goal", "unit", "bound", "seed", "version", "schema", "brief_sha256", "layouts", "baselines"}
LAYOUT_KEYS = {"rank", "value", "gap_percent", "cost", "sensors"}


def _refuse(text):
    raise AssertionError(f"not JSON: {text}")


def test_required_keys_and_no_nan(result):
    content = json.loads(ranking_json(result), parse_constant=_refuse)
    assert set(content) >= TOP_KEYS
    assert all(set(layout) >= LAYOUT_KEYS for layout in content["layouts"])
    assert content["schema"] == 1
    assert content["seed"] == 7
    assert content["title"] == HOSTILE_TITLE
    assert content["noise_figures"][2]["value"] is None  # a NaN in the result
    assert [figure["outside"] for figure in content["noise_figures"]] == ["", "above", "", "below"]
    assert [layout["housings_meet"] for layout in content["layouts"]] == [2, 1, 0]
    assert content["bound_from"] == "branch and bound"


def test_nan_anywhere_becomes_null(result):
    layouts = (dataclasses.replace(result.layouts[0], bound=math.inf, cost=math.nan),)
    broken = dataclasses.replace(result, layouts=layouts, bound=np.float64("nan"))
    content = json.loads(ranking_json(broken), parse_constant=_refuse)
    assert content["bound"] is None
    assert content["layouts"][0]["bound"] is None


def test_values_are_in_edge_units(result):
    content = json.loads(ranking_json(result))
    for layout, written in zip(result.layouts, content["layouts"], strict=True):
        assert abs(written["value"] / layout.value - 1) <= 5e-9  # nine significant digits
        for row, sensor in zip(layout.sensors, written["sensors"], strict=True):
            np.testing.assert_allclose(sensor["position_mm"], 1000 * row.position, rtol=1e-8, atol=1e-12)
            np.testing.assert_allclose(sensor["offset_mm"], 1000 * row.nearest_offset, rtol=1e-8)
            if row.kind_type == "electrode":
                assert sensor["axis"] is None
                assert sensor["axes"] == []
            else:
                np.testing.assert_allclose(sensor["axes"], row.axes, rtol=1e-8, atol=1e-9)
    assert content["regions"][0]["moment_nam"] == 10.0
    assert content["baselines"][3]["sensors"] is None
    assert HOSTILE_NAME in [row["site"] for row in content["layouts"][0]["sensors"]]


def test_same_result_same_bytes(result):
    assert ranking_json(result) == ranking_json(make_result())
