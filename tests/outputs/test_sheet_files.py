"""The placement sheet's table against its pages."""

import csv
import io
from dataclasses import replace

import pytest
from sheet_text import printed_steps

from layout.outputs.sheet.files import SHEET_A4, SHEET_CSV, SHEET_FILES, SHEET_LETTER, sheet_files
from layout.outputs.sheet.table import SHEET


@pytest.fixture(scope="module")
def files(electrodes_only):
    first = electrodes_only.layouts[0]
    return sheet_files(electrodes_only, replace(first, sensors=first.sensors[:5]))


def test_both_papers_print_the_same_numbers(files):
    assert tuple(files) == SHEET_FILES
    assert printed_steps(files[SHEET_A4]) == printed_steps(files[SHEET_LETTER])


def test_the_table_holds_what_is_printed(files):
    rows = list(csv.DictReader(io.StringIO(files[SHEET_CSV])))
    assert list(rows[0]) == list(SHEET)

    def close(number, text):
        return abs(number - float(text)) <= 0.55  # whole millimetres against tenths

    for row, step in zip(rows, printed_steps(files[SHEET_A4]), strict=True):
        assert (int(row["step"]), int(row["number"])) == (step["step"], step["number"])
        assert set(step["tapes"]) == {row["tape_1"], row["tape_2"]}
        assert all(close(step["tapes"][row[name]], row[f"{name}_mm"]) for name in ("tape_1", "tape_2"))
        assert all(close(mm, row["check_mm"]) for mm in step["check"].values())
        near = {int(row[f"neighbour_{k}"]): row[f"neighbour_{k}_mm"] for k in (1, 2, 3) if row[f"neighbour_{k}"]}
        assert set(near) == set(step["neighbours"])
        assert all(close(mm, near[number]) for number, (mm, _) in step["neighbours"].items())
        along, along_mm, across, across_mm, whole_mm = step["fractions"]
        assert close(along_mm, row["sagittal_mm"])
        assert close(across_mm, row["coronal_mm"])
        assert close(whole_mm, row["coronal_whole_mm"])
        assert along == pytest.approx(float(row["sagittal_percent"]), abs=0.06)
        assert across == pytest.approx(float(row["coronal_percent"]), abs=0.06)
