"""The cap template as one drawing at true size for a cutter: SVG 1.1, millimetres, one group per kind of line."""

from __future__ import annotations

import base64
import io
from functools import cache
from pathlib import Path
from xml.sax.saxutils import escape, quoteattr

import numpy as np

from layout.outputs.cap.drawing import CUT, TEXT, Circle, Fill, Item, Line, Words
from layout.outputs.cap.sheet import Sheet
from layout.outputs.plain import fixed, one_line

GROUPS = ("stretch", "mark", "seam", "rim", "cut", "hole", "check", "text")  # from below to above
_FRAME, _HEAD, _LINE = 12.0, 8.0, 5.5  # [mm] border, room of the title, of a line of text
BAR = 100.0  # [mm]
_USUAL = "".join(chr(code) for code in range(32, 127)) + "–…µ"


def sheet_svg(sheet: Sheet, title: str, lines: tuple[str, ...]) -> str:
    """The whole sheet with a title and lines of text below it, and two check bars of 100 mm."""
    foot = _LINE * len(lines) + BAR + 14.0
    width, height = sheet.width + 2 * _FRAME, sheet.height + 2 * _FRAME + _HEAD + foot
    shift = np.array([_FRAME, _FRAME + foot])
    groups: dict[str, list[str]] = {name: [] for name in GROUPS}
    texts: list[str] = []

    def place(points: np.ndarray) -> np.ndarray:
        return np.column_stack([points[..., 0].ravel(), height - points[..., 1].ravel()])

    for piece in sheet.pieces:
        parts: dict[str, list[str]] = {name: [] for name in GROUPS}
        for item in piece.items:
            layer, element = _element(item, lambda points: place(points + shift))
            parts[layer].append(element)
            if isinstance(item, Words):
                texts.append(item.text)
        for name, elements in parts.items():
            if elements:
                groups[name].append(f'<g id="{name}-{piece.name}">{"".join(elements)}</g>')
    low = _FRAME
    for item in _bars(np.array([_FRAME, low])):
        groups["check"].append(_element(item, place)[1])
        if isinstance(item, Words):
            texts.append(item.text)
    heading = Words(np.array([_FRAME, height - _FRAME - 4.0]), one_line(title), 5.0, TEXT, "start", bold=True)
    notes = [
        Words(np.array([_FRAME, low + BAR + 8.0 + _LINE * (len(lines) - 1 - k)]), one_line(text), 3.4, TEXT, "start")
        for k, text in enumerate(lines)
    ]
    groups["text"].append(f'<g id="text-notes">{"".join(_element(one, place)[1] for one in (heading, *notes))}</g>')
    texts += [one.text for one in (heading, *notes)]
    body = "\n".join(f'<g id="{name}">{"".join(groups[name])}</g>' for name in GROUPS)
    letters = "".join(sorted(set("".join(texts)) | set(_USUAL)))
    w, h = _n(width), _n(height)
    return (
        '<?xml version="1.0" encoding="UTF-8"?>\n'
        f'<svg xmlns="http://www.w3.org/2000/svg" width="{w}mm" height="{h}mm" viewBox="0 0 {w} {h}">\n'
        f"<title>{escape(one_line(title))}</title>\n"
        f"<style>{_fonts(letters)}text{{font-family:'Cap Sans',sans-serif}}</style>\n{body}\n</svg>\n"
    )


def _bars(corner: np.ndarray) -> list[Item]:
    x, y = corner
    ends = [[x, y + BAR], [x, y], [x + BAR, y]]
    return [
        Line(np.array(ends), CUT),
        Line(np.array([[x - 1.5, y + BAR], [x + 3.0, y + BAR]]), CUT),
        Line(np.array([[x + BAR, y - 1.5], [x + BAR, y + 3.0]]), CUT),
        Words(np.array([x + BAR / 2, y + 2.0]), "check: 100 mm", 3.4),
        Words(np.array([x + 4.5, y + BAR / 2]), "check: 100 mm", 3.4, turn=90.0),
    ]


def _element(item: Item, place) -> tuple[str, str]:
    if isinstance(item, Fill):
        data = "".join(_path(place(ring)) + "Z" for ring in item.rings)
        return "stretch", f'<path d="{data}" fill="{item.colour}" fill-rule="evenodd"/>'
    if isinstance(item, Circle):
        x, y = place(item.centre[None])[0]
        return item.style.layer, (
            f'<circle cx="{_n(x)}" cy="{_n(y)}" r="{_n(item.radius)}" fill="none" {_stroke(item.style)}/>'
        )
    if isinstance(item, Line):
        data = _path(place(item.points)) + ("Z" if item.closed else "")
        return item.style.layer, f'<path d="{data}" fill="none" {_stroke(item.style)}/>'
    x, y = place(item.place[None])[0]
    weight = ' font-weight="bold"' if item.bold else ""
    turn = f' transform="rotate({_n(-item.turn)} {_n(x)} {_n(y)})"' if item.turn else ""
    return "text", (
        f'<text x="{_n(x)}" y="{_n(y)}" font-size="{_n(item.size)}" text-anchor="{item.anchor}"'
        f"{weight} fill={quoteattr(item.style.colour)}{turn}>{escape(one_line(item.text))}</text>"
    )


def _stroke(style) -> str:
    dash = f' stroke-dasharray="{" ".join(_n(one) for one in style.dash)}"' if style.dash else ""
    return f'stroke="{style.colour}" stroke-width="{_n(style.width)}"{dash}'


def _path(points: np.ndarray) -> str:
    return "M" + "L".join(f"{_n(x)} {_n(y)}" for x, y in points)


def _n(value: float) -> str:
    text = fixed(float(value), 3)
    return text.rstrip("0").rstrip(".") if "." in text else text


@cache
def _fonts(letters: str) -> str:
    """The given letters of DejaVu Sans and its bold as embedded fonts; what it lacks is left to the reader."""
    import matplotlib
    from fontTools import subset
    from fontTools.ttLib import TTFont

    folder = Path(matplotlib.get_data_path()) / "fonts" / "ttf"
    rules = []
    for name, weight in (("DejaVuSans", "normal"), ("DejaVuSans-Bold", "bold")):
        font = TTFont(folder / f"{name}.ttf", recalcTimestamp=False)
        options = subset.Options()
        options.drop_tables += ["FFTM"]
        options.layout_features = []
        cutter = subset.Subsetter(options)
        cutter.populate(text=letters)
        cutter.subset(font)
        file = io.BytesIO()
        font.save(file)
        data = base64.b64encode(file.getvalue()).decode("ascii")
        rules.append(f"@font-face{{font-family:'Cap Sans';font-weight:{weight};src:url(data:font/ttf;base64,{data})}}")
    return "".join(rules)
