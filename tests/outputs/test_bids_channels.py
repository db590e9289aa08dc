"""Channels tables, the template of a recording's sidecar, and our own table of magnetometers."""

import dataclasses
import json

import numpy as np
import pytest

from layout.brief.objects import GradiometerBrief, SitesBrief
from layout.outputs.bids.channels import (
    eeg_channels_tsv,
    eeg_sidecar_template,
    housed_of,
    meg_channels_tsv,
    meg_type,
)
from layout.outputs.bids.dataset import PLACES, bids_files
from layout.outputs.bids.electrodes import electrode_names, electrodes_of
from layout.outputs.bids.magnetometers_table import magnetometers_json, magnetometers_tsv
from layout.physics.given_lead_field import channel_names as lead_field_names
from layout.sensing.electrodes_file import read_electrodes
from layout.sensing.layout_table import read_layout_table


def _rows(text):
    head, *rows = [line.split("\t") for line in text.removesuffix("\n").split("\n")]
    return [dict(zip(head, row, strict=True)) for row in rows]


def test_every_electrode_but_reference_and_ground_is_a_channel(result):
    layout = result.layouts[0]
    ground = dataclasses.replace(layout.sensors[0], number=99, site="AFz", name="ground", role="ground")
    layout = dataclasses.replace(layout, sensors=(*layout.sensors, ground))
    roles = dict(zip(electrode_names(layout), (row.role for row in electrodes_of(layout)), strict=True))
    rows = _rows(eeg_channels_tsv(layout))
    assert [row["name"] for row in rows] == [name for name, role in roles.items() if role == ""]
    (reference,) = (name for name, role in roles.items() if role == "reference")
    assert {row["reference"] for row in rows} == {reference}
    assert {(row["type"], row["units"]) for row in rows} == {("EEG", "µV")}
    sidecar = json.loads(eeg_sidecar_template(result, layout))
    assert sidecar["EEGReference"] == reference
    assert sidecar["EEGGround"] == "AFz"
    assert sidecar["EEGChannelCount"] == len(rows)


def test_magnetic_channels_have_the_standards_types_and_the_lead_fields_names(result):
    layout = result.layouts[0]
    rows = _rows(meg_channels_tsv(layout, result.brief))
    assert {(row["type"], row["units"]) for row in rows} == {("MEGMAG", "fT")}
    names = lead_field_names(dataclasses.replace(result.candidates, pairs=None))
    own = [name for name, at in zip(names, result.candidates.candidate_of_channel, strict=True) if at in layout.chosen]
    chosen = {one.name for one in housed_of(layout)}
    assert sorted(row["name"] for row in rows) == sorted(name for name in own if name.split(" #")[0] in chosen)
    assert [row["name"] for row in _rows(magnetometers_tsv(result, layout))] == [row["name"] for row in rows]
    with pytest.raises(KeyError):
        meg_type(dataclasses.replace(_gradiometer("axial"), shape="round"))
    assert [meg_type(_gradiometer(shape)) for shape in ("axial", "planar")] == ["MEGGRADAXIAL", "MEGGRADPLANAR"]


def _gradiometer(shape):
    return GradiometerBrief("pair", 2, SitesBrief(grid_pitch=0.02), shape, 0.05, 1e-14)


def test_own_table_defines_every_column_and_holds_places_and_axes(result):
    layout = result.layouts[0]
    rows = _rows(magnetometers_tsv(result, layout))
    sidecar = json.loads(magnetometers_json(result, layout))
    assert set(rows[0]) == set(sidecar) - {"Description", "SensorKinds"}
    assert all(cell and cell == cell.strip() for row in rows for cell in row.values())
    expected = [(one, axis) for one in housed_of(layout) for axis in one.axes]
    assert len(rows) == len(expected) > len(housed_of(layout))
    for row, (one, axis) in zip(rows, expected, strict=True):
        numbers = {key: float(row[key]) for key in row if key[-2:] in ("_x", "_y", "_z", "ap") or key in "xyz"}
        np.testing.assert_allclose([numbers[key] for key in "xyz"], 1e3 * one.position, atol=0.0051)
        np.testing.assert_allclose([numbers[f"axis_{key}"] for key in "xyz"], axis, atol=1e-6)
        np.testing.assert_allclose([numbers[f"normal_{key}"] for key in "xyz"], one.normal, atol=1e-6)
        assert numbers["centre_gap"] == pytest.approx(6.5, abs=0.0051)  # as made_result puts them
        assert numbers["housing_gap"] == pytest.approx(0.0, abs=0.0051)
        assert row["kind"] in sidecar["SensorKinds"]


def test_what_is_written_is_read(result, tmp_path):
    layout = result.layouts[0]
    path = tmp_path / "magnetometers.tsv"
    path.write_text(magnetometers_tsv(result, layout), encoding="utf-8")
    sensors = housed_of(layout)
    for read, row in zip(read_layout_table(path), sensors, strict=True):
        assert (read.kind, read.axis_name, read.is_electrode) == (row.kind, row.axis_name, False)
        np.testing.assert_allclose(read.position, row.scalp_position, atol=5.1e-6)
        np.testing.assert_allclose(read.axes, row.axes, atol=1e-6)
    names, points = read_electrodes(path)
    assert len(names) == len(sensors)
    np.testing.assert_allclose(points, [row.scalp_position for row in sensors], atol=5.1e-6)


def test_a_layout_has_the_files_of_its_kinds_only(result, electrodes_only, magnetometers_only):
    every, electric, magnetic = (
        set(bids_files(one, one.layouts[0])) for one in (result, electrodes_only, magnetometers_only)
    )
    assert every == PLACES
    assert not any("/meg/" in name for name in electric)
    assert not any("/eeg/" in name for name in magnetic)
