"""BIDS electrode tables: the specification's rules, and one sentence for every way to break them."""

import numpy as np
import pytest

from layout.errors import FileError
from layout.sensing.electrodes_file import read_electrodes

GOOD = "name\tx\ty\tz\ttype\nE1\t10\t-20\t80.5\tcup\nREF\tn/a\tn/a\tn/a\tcup\nE2\t0\t0\t90\tcup\n"


def write(folder, text, name="sub-01_task-rest_run-1_electrodes.tsv"):
    path = folder / name
    path.write_bytes(text.encode() if isinstance(text, str) else text)
    return path


def test_millimetres_and_missing_coordinates(tmp_path):
    names, positions = read_electrodes(write(tmp_path, GOOD))
    assert names == ("E1", "E2")
    assert np.allclose(positions, [[0.010, -0.020, 0.0805], [0, 0, 0.090]])


def test_windows_line_ends_and_byte_order_mark(tmp_path):
    names, _ = read_electrodes(write(tmp_path, "\ufeff" + GOOD.replace("\n", "\r\n")))
    assert names == ("E1", "E2")


@pytest.mark.parametrize(("unit", "metres"), [("m", 1), ("cm", 0.01), ("mm", 0.001)])
@pytest.mark.parametrize(
    "beside",
    [
        "sub-01_task-rest_run-1_coordsystem.json",
        "sub-01_task-rest_coordsystem.json",
        "sub-01_coordsystem.json",
    ],
)
def test_units_of_the_coordinate_system(tmp_path, unit, metres, beside):
    (tmp_path / beside).write_text(f'{{"EEGCoordinateUnits": "{unit}"}}')
    _, positions = read_electrodes(write(tmp_path, GOOD))
    assert np.allclose(positions[0], np.array([10, -20, 80.5]) * metres)


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("", "first columns"),
        ("name x y z\nE1 1 2 3\n", "tabs"),
        ("name\ty\tx\tz\nE1\t1\t2\t3\n", "first columns"),
        ("name\tx\ty\tz\n", "at least one electrode"),
        ("name\tx\ty\tz\nE1\tn/a\tn/a\tn/a\n", "at least one electrode"),
        ("name\tx\ty\tz\nE1\t1\t2\n", "line 2: must have 4"),
        ("name\tx\ty\tz\nE1\t1\t2\t3\nE1\t1\t2\t4\n", "line 3: names must be unique, got 'E1'"),
        ("name\tx\ty\tz\n\t1\t2\t3\n", "name must not be empty"),
        ("name\tx\ty\tz\nE1\t1\ttwo\t3\n", "y must be a finite number or n/a, got 'two'"),
        ("name\tx\ty\tz\nE1\t1\t2\tinf\n", "z must be a finite number or n/a, got 'inf'"),
        (b"name\tx\ty\tz\nE\xff\t1\t2\t3\n", "UTF-8"),
    ],
)
def test_bad_tables(tmp_path, text, said):
    with pytest.raises(FileError, match=said) as caught:
        read_electrodes(write(tmp_path, text))
    assert "electrodes.tsv" in str(caught.value)
    assert "\n" not in str(caught.value)


def test_missing_file(tmp_path):
    with pytest.raises(FileError, match="no such file"):
        read_electrodes(tmp_path / "electrodes.tsv")


@pytest.mark.parametrize(
    ("text", "said"),
    [("{", "JSON"), ("[]", "JSON"), ("{}", "missing"), ('{"EEGCoordinateUnits": "n/a"}', "'n/a'")],
)
def test_bad_coordinate_system(tmp_path, text, said):
    (tmp_path / "coordsystem.json").write_text(text)
    with pytest.raises(FileError, match=said):
        read_electrodes(write(tmp_path, GOOD, "electrodes.tsv"))
