"""What is printed on a placement sheet, read back from the PDF."""

import io
import re

import pdfplumber

ENDS = ("nasion", "left ear", "right ear", "inion", "Cz")


def pages_of(pdf: bytes) -> pdfplumber.PDF:
    """The pages of a PDF."""
    return pdfplumber.open(io.BytesIO(pdf))


def printed_steps(pdf: bytes) -> list[dict]:
    """The rows of the table in order: step, number, offsets {position: mm}, tapes and check {landmark: mm}, neighbours
    {number: (mm, placed before)}, fractions (midline %, mm, across %, mm, whole mm).
    """
    steps = []
    with pages_of(pdf) as pages:
        for page in pages.pages:
            for table in page.extract_tables():
                if table[0][0] == "step":
                    steps += [_read(row) for row in table[1:]]
    return steps


def _read(row: list[str]) -> dict:
    step, number, _, offsets, arcs, tapes, neighbours, check, *_ = (cell.replace("\xa0", " ") for cell in row)
    found = dict.fromkeys(re.findall(r"(\S+), on the spot", offsets), 0)
    found |= {name: int(mm) for name, mm in re.findall(r"(\S+) \+ (\d+):", offsets)}
    ways = {name: int(mm) for name, mm in re.findall(rf"({'|'.join(ENDS)}) (\d+)", tapes)}
    checks = {name: int(mm) for name, mm in re.findall(rf"({'|'.join(ENDS)}) (\d+)", check)}
    near = {int(no): (int(mm), not opened) for opened, no, mm in re.findall(r"(\(?)(\d+): (\d+)\)?", neighbours)}
    fractions = re.match(r"midline (-?[\d.]+) %, (-?\d+)\nacross (-?[\d.]+) %, (-?\d+) of (\d+)", arcs)
    return {
        "step": int(step),
        "number": int(number),
        "offsets": found,
        "tapes": ways,
        "check": checks,
        "neighbours": near,
        "fractions": tuple(float(value) for value in fractions.groups()),
    }
