"""The placement sheet's table: one row per step, with a box to tick and lines to write on."""

from __future__ import annotations

from typing import TYPE_CHECKING

from layout.outputs.plain import fixed
from layout.outputs.result import SensorRow
from layout.outputs.sheet.distances import MARKS, Offset
from layout.outputs.sheet.page_style import PLAIN, draw_mark, marked_up, style
from layout.outputs.sheet.rows import Housing, Sheet, Step
from layout.outputs.sheet.words import ROOM_PERCENT, room_at
from layout.units import DEGREE, MM, PERCENT

if TYPE_CHECKING:
    from reportlab.platypus import Flowable, Table

SIZE = 7.8
ONE_LINE = 20  # characters of a site and a kind that stand on one line
NEAR_EAR = 30 * MM  # the planes of the arcs crowd there: the midline's per cent says little
# Heading, and share of the width.
COLUMNS = (
    ("step", 0.054),
    ("no.", 0.04),
    ("sensor, and how it stands", 0.136),
    ("nearest standard position, and from it to the sensor, mm", 0.172),
    ("on the arcs: per cent, mm on this head", 0.15),
    ("two tapes, mm from", 0.094),
    ("neighbours, no.: mm", 0.078),
    ("check, mm from", 0.096),
    (f"room to err, for {ROOM_PERCENT}", 0.084),
    ("write down", 0.096),
)


def steps_table(sheet: Sheet, width: float) -> Table:
    """All steps; the header comes again on every page, and no row is cut by the page's end."""
    from reportlab.platypus import Paragraph, Table, TableStyle

    rows = [[Paragraph(heading, style(7.2, bold=True)) for heading, _ in COLUMNS]]
    rows += [_cells(step) for step in sheet.steps]
    rules = [
        ("FONTNAME", (0, 0), (-1, -1), PLAIN),
        ("GRID", (0, 0), (-1, -1), 0.4, "black"),
        ("LINEBELOW", (0, 0), (-1, 0), 1.2, "black"),
        ("VALIGN", (0, 0), (-1, -1), "MIDDLE"),
        ("VALIGN", (0, 0), (-1, 0), "BOTTOM"),
        ("LEFTPADDING", (0, 0), (-1, -1), 3),
        ("RIGHTPADDING", (0, 0), (-1, -1), 2),
        ("TOPPADDING", (0, 0), (-1, -1), 2.5),
        ("BOTTOMPADDING", (0, 0), (-1, -1), 3),
    ]
    return Table(rows, colWidths=[share * width for _, share in COLUMNS], repeatRows=1, style=TableStyle(rules))


def _cells(step: Step) -> list[Flowable | list[Flowable]]:
    row, arcs, fix = step.sensor, step.arcs, step.fix
    tape = {mark: f"{MARKS[mark]} <b>{_mm(length)}</b>" for mark, length in fix.lengths.items()}
    near = [
        f"{number}: <b>{_mm(length)}</b>" if placed else f"({number}: {_mm(length)})"
        for number, length, placed in step.neighbours
    ]
    return [
        _tick(step.step),
        _mark(row),
        _lines(*_who(row), *([] if step.housing is None else _sits(step.housing))),
        _lines(*(_offset(one) for one in step.offsets)),
        _lines(
            f"midline <b>{fixed(arcs.along / PERCENT, 1)} %</b>, {_mm(arcs.along_length)}",
            f"across <b>{fixed(arcs.across / PERCENT, 1)} %</b>, {_mm(arcs.across_length)} of {_mm(arcs.across_whole)}",
            *(["near the ear: use tapes"] if row.landmark_distance[1:3].min() < NEAR_EAR else []),
        ),
        _lines(*(tape[mark] for mark in fix.pair)),
        _lines(*near) if near else _lines("no other"),
        _lines("by neighbours") if fix.check is None else _lines(tape[fix.check], "found _______"),
        _lines(*_room(step)),
        _lines(*_to_write(row)),
    ]


def _who(row: SensorRow) -> list[str]:
    role = [f"<b>{row.role.upper()}</b>"] if row.role else []
    site, kind = marked_up(row.site, 40), marked_up(row.kind, 40)
    if row.role == "ground":
        return [f"<b>{site}</b>", *role]
    if len(site) + len(kind) < ONE_LINE:
        return [f"<b>{site}</b> {kind}", *role]
    return [f"<b>{site}</b>", *role, kind]


def _offset(offset: Offset) -> str:
    name = f"<b>{marked_up(offset.name, 12)}</b>"
    if not offset.words:
        return f"{name}, on the spot"
    words = offset.words.replace(" mm ", "\N{NO-BREAK SPACE}")
    return f"{name} + {_mm(offset.length)}: {words}"


def _room(step: Step) -> list[str]:
    """How far off the sensor may be, one line a way."""
    if step.room is None:
        return ["not known"]
    slide, tilt, lift = (room_at(room, unit) for room, unit in zip(*step.rooms, strict=True))
    lines = [f"slide {slide} mm", f"tilt {tilt}°" if tilt else "", f"lift {lift} mm" if lift else ""]
    return [marked_up(line) for line in lines if line]


def _sits(housing: Housing) -> list[str]:
    """How a housing stands: axes, gap, lean."""
    several = len(housing.axes) > 1
    lines = [f"axis {place} {words}" if several else f"axis {words}" for place, words in enumerate(housing.axes, 1)]
    parts = [("hair", housing.hair), ("slot", housing.slot)]
    held = ", ".join(f"{what} {fixed(gap / MM, 1)}" for what, gap in parts if gap)
    lines.append(f"gap {fixed(housing.lift / MM, 1)} mm{f' ({held})' if held else ''}")
    if housing.leans_to:
        lines.append(f"leans {fixed(housing.lean / DEGREE, 0)}° {housing.leans_to}")
    return lines


def _to_write(row: SensorRow) -> list[str]:
    first = "_______ kΩ" if row.kind_type == "electrode" else "offset _____ nT"
    return [first, "off by ____ mm"]


def _lines(*texts: str) -> list[Flowable]:
    from reportlab.platypus import Paragraph

    return [Paragraph(text, style(SIZE)) for text in texts]


def _mm(length: float) -> str:
    return fixed(length / MM, 0)


def _tick(step: int) -> Flowable:
    """A box to tick and the step."""
    from reportlab.platypus import Flowable

    class Tick(Flowable):
        def wrap(self, *_) -> tuple[float, float]:
            return 36, 14

        def draw(self) -> None:
            self.canv.setLineWidth(0.9)
            self.canv.setStrokeGray(0)
            self.canv.rect(0, 1, 12, 12, stroke=1, fill=0)
            self.canv.setFillGray(0)
            self.canv.setFont(PLAIN, 9)
            self.canv.drawString(17, 3.6, str(step))

    return Tick()


def _mark(row: SensorRow) -> Flowable:
    from reportlab.platypus import Flowable

    class Mark(Flowable):
        def wrap(self, *_) -> tuple[float, float]:
            return 18, 18

        def draw(self) -> None:
            draw_mark(self.canv, 11, 9, 8.5, row)

    return Mark()
