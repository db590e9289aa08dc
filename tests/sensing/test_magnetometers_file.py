"""The table of magnetometers: one sentence for every way to break it."""

import numpy as np
import pytest

from layout.errors import FileError
from layout.sensing.layout_table import read_layout_table
from layout.sensing.magnetometers_file import NEEDED, read_magnetometers

ROWS = (
    "H1 both #1\t1\thead\tH1\tboth\t1\t0\t0\t70\t-20\t30",
    "H1 both #2\t1\thead\tH1\tboth\t0\t1\t0\t70\t-20\t30",
    "H2\t2\tn/a\tH2\tn/a\t0\t0\t1\t0\t0\t95.5",
)
GOOD = "\n".join(["\t".join(NEEDED), *ROWS, ""])


def write(folder, text):
    path = folder / "magnetometers.tsv"
    path.write_bytes(text if isinstance(text, bytes) else text.encode())
    return path


def test_channels_of_one_number_are_one_sensor(tmp_path):
    first, second = read_magnetometers(write(tmp_path, "\ufeff" + GOOD.replace("\n", "\r\n")))
    assert (first.name, first.site, first.kind, first.axis_name) == ("H1 both", "H1", "head", "both")
    np.testing.assert_allclose(first.scalp_position, [0.070, -0.020, 0.030])
    np.testing.assert_array_equal(first.axes, np.eye(3)[:2])
    assert (second.kind, second.axis_name) == (None, None)
    np.testing.assert_allclose(second.scalp_position, [0, 0, 0.0955])


@pytest.mark.parametrize(
    ("text", "words"),
    [
        (GOOD.replace("axis_y", "axis_q"), "must have the tab-separated columns .* lacks axis_y"),
        (GOOD.replace("\t95.5", ""), "line 4: must have 11 tab-separated fields as the header has, got 10"),
        (GOOD.replace("95.5", "high"), "line 4: scalp_x, scalp_y, scalp_z must be finite numbers, got 0, 0, high"),
        (GOOD.replace("both\t0\t1", "both\tnan\t1"), "line 3: axis_x, axis_y, axis_z must be finite numbers"),
        ("\t".join(NEEDED) + "\n", "must list at least one sensor"),
        ("", "must have the tab-separated columns"),
        (b"\xff\xfe", "must be a readable UTF-8 text file"),
    ],
)
def test_broken_tables_are_refused_in_one_sentence(tmp_path, text, words):
    with pytest.raises(FileError, match=words) as problem:
        read_magnetometers(write(tmp_path, text))
    assert "\n" not in str(problem.value)


def test_a_missing_file_is_named(tmp_path):
    with pytest.raises(FileError, match="must exist"):
        read_magnetometers(tmp_path / "magnetometers.tsv")
    with pytest.raises(FileError, match="must exist"):
        read_layout_table(tmp_path / "magnetometers.tsv")
