"""The comma-separated tables read back by the standard library's reader."""

import csv
import io
import json
from dataclasses import replace

import numpy as np
from made_evidence import with_evidence

from layout.outputs.columns import columns_json
from layout.outputs.evidence_files import PLACEMENT_FILES
from layout.outputs.helmet.columns import CLASHES, POSES
from layout.outputs.plain import one_line
from layout.outputs.result import Polished, PolishedSensor
from layout.outputs.sheet.table import SHEET
from layout.outputs.tables import SENSOR_COLUMNS, polished_csv, ranking_csv, sensors_csv


def _read(text):
    return list(csv.DictReader(io.StringIO(text, newline="")))


def test_sensors_round_trip_within_rounding(result):
    for layout in result.layouts:
        rows = _read(sensors_csv(layout, result.unit))
        assert tuple(rows[0]) == tuple(column.format(unit=result.unit) for column in SENSOR_COLUMNS)
        assert len(rows) == sum(len(row.axes) for row in layout.sensors)
        by_number = {row.number: row for row in layout.sensors}
        for written in rows:
            row = by_number[int(written["number"])]
            assert written["name"] == one_line(row.name)  # commas, quotes and unicode survive; control characters not
            place = [float(written[f"{axis}_mm"]) for axis in "xyz"]
            np.testing.assert_allclose(place, 1000 * row.position, atol=0.005001)
            inion = float(written["from_inion_mm"])
            assert abs(inion - 1000 * row.landmark_distance[3]) <= 0.0501
            assert abs(float(written[f"lost_without_{result.unit}"]) - row.worth) <= 1e-6
            axis = [written[f"axis_{name}"] for name in "xyz"]
            if row.kind_type == "electrode":
                assert axis == ["", "", ""]
            else:
                expected = row.axes[int(written["channel"]) - 1]
                np.testing.assert_allclose([float(value) for value in axis], expected, atol=5.1e-7)


def test_a_reference_is_named(result):
    roles = {row["number"]: row["role"] for row in _read(sensors_csv(result.layouts[0], result.unit))}
    assert [number for number, role in roles.items() if role == "reference"] == ["2"]


def test_ranking_has_layouts_then_baselines(result):
    rows = _read(ranking_csv(result))
    assert [row["row"] for row in rows] == ["layout"] * 3 + ["baseline"] * 4
    assert all(None not in row and None not in row.values() for row in rows)  # every row has every column
    assert float(rows[0]["value_bits"]) == round(result.layouts[0].value, 7)
    assert rows[0]["moved"] == ""
    assert rows[1]["percent_of_best"] == f"{100 * result.layouts[1].value / result.layouts[0].value:.6g}"
    assert len(rows[0]["sensors"].split(";")) > len(result.layouts[0].sensors)  # one hostile name holds a semicolon
    assert rows[6]["sensors"] == ""


def test_columns_json_defines_every_column_and_no_other(result):
    defined = json.loads(columns_json(result.unit))
    [placed, *_] = with_evidence(result).evidence.placements
    slid = PolishedSensor("a", np.zeros(3), np.zeros(3), np.eye(3), 0.001)
    written = {
        "ranking.csv": ranking_csv(result),
        "layout-*/sensors.csv": sensors_csv(result.layouts[0], result.unit),
        "layout-*/sheet.csv": ",".join(SHEET),  # see test_sheet_files.py
        **{f"layout-*/{name}": table(placed) for name, table in PLACEMENT_FILES.items()},
        "layout-*/helmet-poses.csv": ",".join(POSES),  # see test_helmet_poses.py
        "layout-*/clashes.csv": ",".join(CLASHES),
        "polished.csv": polished_csv(replace(result, polished=Polished(1.0, 2.0, (slid,)))),
    }
    assert {name: list(columns) for name, columns in defined.items()} == {
        name: text.splitlines()[0].split(",") for name, text in written.items()
    }
    for columns in defined.values():
        for name, column in columns.items():
            assert column["Description"].strip()
            measures = (
                "_mm",
                "_bits",
                "_percent",
                "_deg",
                "_degrees",
                "_direction",
                "percent_of_best",
                "percent_of_value",
            )
            assert ("Units" in column) == name.endswith(measures), name


def test_housings_that_meet_are_counted(result, electrodes_only):
    assert [row["housings_meet"] for row in _read(ranking_csv(result))] == ["2", "1", "0", "", "", "", ""]
    assert {row["housings_meet"] for row in _read(ranking_csv(electrodes_only))} == {""}
