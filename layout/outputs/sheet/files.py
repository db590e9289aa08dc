"""The files of a layout's placement sheet: on A4, on Letter, and its numbers as a table."""

from __future__ import annotations

from layout.outputs.result import DesignResult, RankedLayout
from layout.outputs.sheet.pages import sheet_pdf
from layout.outputs.sheet.rows import sheet_of
from layout.outputs.sheet.table import sheet_csv

SHEET_A4, SHEET_LETTER, SHEET_CSV = "placement-sheet-a4.pdf", "placement-sheet-letter.pdf", "sheet.csv"
SHEET_FILES = (SHEET_A4, SHEET_LETTER, SHEET_CSV)


def sheet_files(result: DesignResult, layout: RankedLayout) -> dict[str, str | bytes]:
    """File name -> content; the head is measured once for all three."""
    sheet = sheet_of(result, layout)
    return {
        SHEET_A4: sheet_pdf(sheet, "a4"),
        SHEET_LETTER: sheet_pdf(sheet, "letter"),
        SHEET_CSV: sheet_csv(sheet.steps),
    }
