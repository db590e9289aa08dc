"""The electrode files against the rules of the BIDS specification."""

import dataclasses
import json
import re

import numpy as np
from references import bids_electrode_rules as rules

from layout.outputs.bids.dataset import COORDSYSTEM_JSON, ELECTRODES_JSON, ELECTRODES_TSV
from layout.outputs.bids.electrodes import coordsystem_json, electrodes_json, electrodes_of, electrodes_tsv


def _lines(layout):
    text = electrodes_tsv(layout)
    assert text.endswith("\n")
    assert "\r" not in text
    return [line.split("\t") for line in text[:-1].split("\n")]


def test_columns_names_and_missing_values(result):
    head, *rows = _lines(result.layouts[0])
    assert head[:4] == rules.FIRST_COLUMNS
    defined = json.loads(electrodes_json())
    assert defined.pop("Description")
    assert set(head[4:]) - rules.RECOMMENDED_COLUMNS == set(defined)
    assert all(column["Description"] for column in defined.values())
    assert all(len(row) == len(head) for row in rows)
    assert all(cell.strip() == cell and cell for row in rows for cell in row)
    names = [row[0] for row in rows]
    assert len(names) == len(set(names))
    assert all(cell == rules.MISSING for row in rows for cell in row[4:7])
    roles = [row[head.index("role")] for row in rows]
    assert set(roles) - {rules.MISSING} == {"reference"} < set(defined["role"]["Levels"])
    expected = [sensor.role or rules.MISSING for sensor in electrodes_of(result.layouts[0])]
    assert roles == expected
    assert roles.count("reference") == 1


def test_only_electrodes_and_positions_within_rounding(result):
    layout = result.layouts[0]
    electrodes = electrodes_of(layout)
    assert 0 < len(electrodes) < len(layout.sensors)
    _, *rows = _lines(layout)
    for row, cells in zip(electrodes, rows, strict=True):
        np.testing.assert_allclose([float(cell) for cell in cells[1:4]], 1000 * row.position, atol=0.005001)


def test_unknown_coordinates_are_n_a(result):
    layout = result.layouts[0]
    lost = dataclasses.replace(layout.sensors[0], position=np.full(3, np.nan))
    _, first, *_ = _lines(dataclasses.replace(layout, sensors=(lost, *layout.sensors[1:])))
    assert first[1:4] == [rules.MISSING] * 3


def test_names_stay_unique_where_two_kinds_share_a_site(result):
    layout = result.layouts[0]
    twin = dataclasses.replace(layout.sensors[0], name="dry twin", number=2)
    _, *rows = _lines(dataclasses.replace(layout, sensors=(layout.sensors[0], twin)))
    assert rows[1][0] == "dry twin"
    assert rows[0][0] != rows[1][0]


def test_coordsystem(result):
    content = json.loads(coordsystem_json(result))
    assert set(content) >= rules.REQUIRED_KEYS
    assert content["EEGCoordinateUnits"] in rules.UNITS
    for system, description in rules.DESCRIBED_IF_OTHER.items():
        assert content[system] == "Other"
        assert content[description].strip()
    assert content["AnatomicalLandmarkCoordinateUnits"] == "mm"
    marks = content["AnatomicalLandmarkCoordinates"]
    assert set(marks) == {"NAS", "LPA", "RPA"}
    np.testing.assert_allclose(marks["NAS"], 1000 * result.head.landmarks.nas, atol=0.005001)
    np.testing.assert_allclose(marks["LPA"], 1000 * result.head.landmarks.lpa, atol=0.005001)


def test_file_names():
    assert re.fullmatch(rules.ELECTRODES_NAME, ELECTRODES_TSV.rpartition("/")[2])
    assert re.fullmatch(rules.COORDSYSTEM_NAME, COORDSYSTEM_JSON.rpartition("/")[2])
    assert ELECTRODES_TSV.replace(".tsv", ".json") == ELECTRODES_JSON  # a sidecar has its table's name
