"""The placement sheet's page of words: what the head is, its measures, how to use the numbers, cautions, signatures."""

from __future__ import annotations

from typing import TYPE_CHECKING

from layout.outputs.cautions import CAUTIONS
from layout.outputs.plain import fixed
from layout.outputs.sheet.order import ORDER_RULE
from layout.outputs.sheet.page_style import BOLD, PLAIN, marked_up, style
from layout.outputs.sheet.rows import Sheet
from layout.outputs.sheet.words import ROOM_PERCENT
from layout.units import MM

if TYPE_CHECKING:
    from reportlab.platypus import Flowable

SIZE = 8.6
LANDMARK_WORDS = (
    "<b>nasion</b>: the dip at the root of the nose, between the eyes",
    "<b>left ear, right ear</b>: the preauricular points, the dips in front of the ear canals (feel them when the "
    "mouth opens)",
    "<b>inion</b>: the bump at the back of the head, on the midline",
    "<b>Cz</b>, the vertex: halfway from nasion to inion and halfway from ear to ear; mark it first",
)
ARC_WORDS = (
    "<b>On the arcs (fits any head).</b> Lay the tape from the nasion over Cz to the inion. Mark the <b>midline</b> "
    "per cent of its length from the nasion (under 0 % or over 100 %: go on past nasion or inion with the same tape). "
    "Then lay the tape from the left ear over that mark to the right ear: the sensor is at the <b>across</b> per cent "
    "of this length from the left ear."
)
TAPE_WORDS = (
    "<b>Two tapes (a head of this size).</b> Hold one tape at each of the two landmarks and pull both straight along "
    "the scalp. The sensor is where the two lengths meet, on the side of its standard position. The pair given is the "
    "one that fixes the sensor best: short ways that cross squarely and keep off eyes and neck. Where an ear is in the "
    "way, pass the tape close to the head."
)
NEAR_WORDS = (
    "<b>Neighbours.</b> Millimetres along the scalp to the nearest sensors, by number. In brackets: not placed yet "
    "when you follow the steps."
)
CHECK_WORDS = (
    "<b>Check.</b> After placing, measure from a third landmark and write down what you find. If it is off by more "
    "than 5 mm, or than the room in the table where that is less (but 2 mm is as much as a tape tells), measure again."
)
WRITE_WORDS = (
    "<b>Write down</b> the impedance of each electrode, the field offset of each sensor in a housing, and how far off "
    "it ended up; tick the box when it is checked."
)
NUMBER_WORDS = (
    "<b>Step and number differ.</b> The step is the order of placing on this sheet. The number in the mark is the "
    "sensor's number in all files and pictures of this layout; neighbours are given by it."
)
SLOT_WORDS = (
    "<b>Helmet slots.</b> Sensors in a helmet go into the slots named in the table. The lengths then say where each "
    "one meets the scalp of this head when the helmet sits as planned: use them to check the helmet's seat."
)
OFFSET_WORDS = (
    "<b>Directions</b> are the wearer's: left is the wearer's left; front, back, up and down along the scalp. Offsets "
    "lead from the standard position to the sensor: its whole length, then its parts."
)
ROOM_WORDS = (
    "<b>Room.</b> How far the sensor may be off (slide: along the scalp), in the worst direction and with all others "
    f"in place, before the layout's value is worse by {ROOM_PERCENT} under the model; > where it is not "
    "within what was tried."
)
NO_ROOM_WORDS = "<b>Room.</b> How far a sensor may be off was not computed for this sheet: keep within 5 mm."
HOUSING_WORDS = (
    "<b>Housings.</b> The gap is from the scalp to the middle of the housing's face, hair included. A flat "
    "axis lies along the scalp. An axis turned end for end only changes the sign of its signal: keep to one way and "
    "note it."
)
HEAD_WORDS = (
    "The millimetres on this sheet hold for one head: <b>{name}</b>. Measure the person, and compare before you use "
    "them."
)
RATIO_WORDS = (
    "Ratios within 2 %: use the millimetres as they are. Otherwise place by the per cents of the arcs, and multiply "
    "every length and offset by the ratio (front to back by the first, side to side by the second)."
)


def about_the_head(sheet: Sheet, width: float) -> list[Flowable]:
    """Title, fields to sign, the head and its measures, landmarks."""
    from reportlab.platypus import Paragraph, Spacer

    count = len(sheet.steps)
    things = "1 sensor" if count == 1 else f"{count} sensors"
    return [
        Paragraph("Placement sheet", style(17, bold=True)),
        Spacer(0, 4),
        Paragraph(marked_up(sheet.title, 160), style(10.5, bold=True)),
        Paragraph(f"Layout {sheet.rank}, {things} to place", style(9.5)),
        Spacer(0, 8),
        _fields(width),
        Paragraph("The head", style(11, bold=True, space_before=10)),
        Paragraph(HEAD_WORDS.format(name=marked_up(sheet.head.name, 80)), style(SIZE, space_before=2)),
        *(Paragraph(f"• {marked_up(note, 600)}", style(SIZE, space_before=2, indent=0)) for note in sheet.notes),
        Spacer(0, 6),
        _measures(sheet, width),
        Paragraph(RATIO_WORDS, style(SIZE, space_before=4)),
        Paragraph("Landmarks", style(11, bold=True, space_before=10)),
        *(Paragraph(f"• {words}", style(SIZE, space_before=2)) for words in LANDMARK_WORDS),
    ]


def how_to_use(sheet: Sheet) -> list[Flowable]:
    """How to use the numbers, and cautions."""
    from reportlab.platypus import Paragraph

    room = ROOM_WORDS if any(step.room is not None for step in sheet.steps) else NO_ROOM_WORDS
    order = f"<b>Order.</b> {ORDER_RULE}"
    ways = [ARC_WORDS, TAPE_WORDS, OFFSET_WORDS, NEAR_WORDS, CHECK_WORDS, room, WRITE_WORDS, NUMBER_WORDS, order]
    if sheet.in_slots:
        ways.insert(0, SLOT_WORDS)
    if any(step.housing is not None for step in sheet.steps):
        ways.append(HOUSING_WORDS)
    return [
        Paragraph("How to find a sensor's place", style(11, bold=True, space_before=10)),
        *(Paragraph(words, style(SIZE, space_before=4)) for words in ways),
        Paragraph("Cautions", style(11, bold=True, space_before=8)),
        *(Paragraph(f"• {marked_up(words, 600)}", style(SIZE, space_before=2)) for words in CAUTIONS[:3]),
    ]


def _fields(width: float) -> Flowable:
    """Lines to fill in by hand."""
    from reportlab.platypus import Paragraph, Table, TableStyle

    cells = [["person (code)", "date and time"], ["placed by (initials)", "checked by (initials)"]]
    rows = [[Paragraph(text, style(7)) for text in row] for row in cells]
    return Table(
        rows,
        colWidths=[width / 2] * 2,
        rowHeights=[27] * 2,
        style=TableStyle([("GRID", (0, 0), (-1, -1), 0.6, "black"), ("VALIGN", (0, 0), (-1, -1), "TOP"), *_tight()]),
    )


def _measures(sheet: Sheet, width: float) -> Flowable:
    """The head's own lengths beside room for the person's."""
    from reportlab.platypus import Paragraph, Table, TableStyle

    found = sheet.measures
    lengths = [
        ("nasion to inion over Cz", found.nasion_inion),
        ("ear to ear over Cz", found.ear_to_ear),
        ("round brow and back of the head, level", found.circumference),
    ]
    head = ["length with the tape", "this head, mm", "the person, mm", "person / head"]
    rows = [[Paragraph(text, style(7.5, bold=True)) for text in head]]
    rows += [
        [Paragraph(name, style(SIZE)), Paragraph(fixed(length / MM, 0), style(10, bold=True)), "", ""]
        for name, length in lengths
        if length is not None
    ]
    return Table(
        rows,
        colWidths=[0.43 * width, 0.19 * width, 0.19 * width, 0.19 * width],
        rowHeights=[24] + [23] * (len(rows) - 1),
        style=TableStyle([("GRID", (0, 0), (-1, -1), 0.6, "black"), ("VALIGN", (0, 0), (-1, -1), "MIDDLE"), *_tight()]),
    )


def _tight() -> list[tuple]:
    return [
        ("LEFTPADDING", (0, 0), (-1, -1), 3),
        ("RIGHTPADDING", (0, 0), (-1, -1), 3),
        ("TOPPADDING", (0, 0), (-1, -1), 2),
        ("BOTTOMPADDING", (0, 0), (-1, -1), 2),
        ("FONTNAME", (0, 0), (-1, -1), PLAIN),
        ("FONTNAME", (0, 0), (-1, 0), BOLD),
    ]
