"""The report's flat charts as inline SVG and rows of bars: value against the bound, channel curve, noise."""

from __future__ import annotations

import base64
import io
import math
from html import escape
from typing import Any

import numpy as np

from layout.outputs.curve_tables import Curve
from layout.outputs.evidence_result import ChannelNoise
from layout.outputs.plain import bound_text, fixed, one_line
from layout.outputs.result import DesignResult, RankedLayout
from layout.units import FT, UV

PART_COLOURS = ("#1F3A5F", "#E8A33D", "#6FA8DC", "#B5525C", "#DCE3C8")  # told apart by colour-blind readers: tested
FOUND, BOUND, EVEN, STANDARD, QUIET = "#0B3C6F", "#A34E00", "#5B2A6E", "#3F6B2E", "#5E6672"
NEGATIVE, MIDDLE, POSITIVE = (0x8A, 0x4B, 0x00), (0xFA, 0xFA, 0xF8), (0x0B, 0x3C, 0x6F)  # of the correlation's colours
WIDTH, HEIGHT = 420, 300  # of the curve's own units: text of size 13 stays legible on a phone
LEFT, RIGHT, TOP, BOTTOM = 46, 12, 12, 46
LABELLED = 32  # channels up to which each row of the correlation carries its sensor's number
STRONGEST = 5  # pairs of channels named beside the correlation


def standing(result: DesignResult, layout: RankedLayout) -> list[dict[str, Any]]:
    """A layout's bound, its value and the baselines as bars: width in per cent of the longest, share of the value."""
    longest = max([layout.bound, layout.value, *(one.value for one in result.baselines)])

    def bar(name: str, kind: str, value: float, text: str, note: str = "") -> dict[str, Any]:
        width = max(0.0, min(100.0, 100 * value / longest)) if longest > 0 else 0.0
        share = 100 * value / layout.value if layout.value else float("nan")
        return {
            "name": one_line(name),
            "kind": kind,
            "width": fixed(width, 2),
            "text": text,
            "share": fixed(share, 1, "–"),
            "note": one_line(note),
        }

    return [
        bar(f"layout {layout.rank}", "value", layout.value, fixed(layout.value, 3)),
        bar("bound", "bound", layout.bound, bound_text(layout.bound, result.unit), "what no allowed layout can pass"),
        *(bar(one.name, "baseline", one.value, fixed(one.value, 3), one.note) for one in result.baselines),
    ]


def curve_svg(curve: Curve) -> str:
    """Value and bound against what is spent, with both baselines, the ceiling and the knee."""
    points = curve.points
    spent = [one.spent for one in points]
    lines = (
        ("bound", BOUND, [one.bound for one in points]),
        ("even", EVEN, [one.even_spread for one in points]),
        ("standard", STANDARD, [one.standard for one in points]),
        ("found", FOUND, [one.value for one in points]),
    )
    heights = [value for _, _, line in lines for value in line if value is not None] + [curve.ceiling]
    ticks_y, ticks_x = ticks(0.0, max(heights)), ticks(min(0.0, *spent), max(spent))
    top, right = max(*ticks_y, max(heights)), max(*ticks_x, max(spent))

    def x(value: float) -> float:
        return LEFT + (WIDTH - LEFT - RIGHT) * value / right

    def y(value: float) -> float:
        return HEIGHT - BOTTOM - (HEIGHT - TOP - BOTTOM) * value / top

    what = "sensors" if curve.by == "count" else "budget"
    goal = "information (bits)" if curve.unit == "bits" else "linearised error (mm)"
    said = [_grid(x, y, ticks_x, ticks_y, right)]
    said.append(
        f'<line x1="{LEFT}" x2="{x(right):.1f}" y1="{y(curve.ceiling):.1f}" y2="{y(curve.ceiling):.1f}"'
        f' stroke="{QUIET}" stroke-width="1.5" stroke-dasharray="2 4"/>'
    )
    dashes = {"bound": ' stroke-dasharray="7 4"', "even": "", "standard": "", "found": ""}
    for name, colour, line in lines:
        pairs = [(x(at), y(value)) for at, value in zip(spent, line, strict=True) if value is not None]
        path = " ".join(f"{px:.1f},{py:.1f}" for px, py in pairs)
        width = 2.5 if name == "found" else 1.7
        said.append(f'<polyline points="{path}" fill="none" stroke="{colour}" stroke-width="{width}"{dashes[name]}/>')
        said += [_mark(name, px, py, colour) for px, py in pairs]
    if curve.knee is not None:
        knee = points[curve.knee]
        said.append(
            f'<circle cx="{x(knee.spent):.1f}" cy="{y(knee.value):.1f}" r="9" fill="none" stroke="{FOUND}"'
            ' stroke-width="1.5"/>'
        )
    said.append(f'<text x="{x(right / 2):.1f}" y="{HEIGHT - 8}" text-anchor="middle">{what}</text>')
    said.append(
        f'<text x="14" y="{y(top / 2):.1f}" text-anchor="middle" '
        f'transform="rotate(-90 14 {y(top / 2):.1f})">{goal}</text>'
    )
    label = escape(f"{goal} against {what}; the same numbers stand in the table below")
    return f'<svg viewBox="0 0 {WIDTH} {HEIGHT}" role="img" aria-label="{label}">{"".join(said)}</svg>'


def curve_key(curve: Curve) -> list[tuple[str, str, str]]:
    """(mark as SVG, colour, words) of each line of `curve_svg`."""
    entries = [
        ("found", FOUND, "best layout met, " + ("each contains the smaller" if curve.nested else "each searched anew")),
        ("bound", BOUND, "bound: no allowed layout passes it"),
        ("even", EVEN, "even spread"),
        ("standard", STANDARD, "standard positions"),
        ("ceiling", QUIET, f"all candidates at once: {fixed(curve.ceiling, 2)} {curve.unit}"),
    ]
    there = {"even": any(one.even_spread is not None for one in curve.points)}
    there["standard"] = any(one.standard is not None for one in curve.points)
    dashes = {"bound": ' stroke-dasharray="7 4"', "ceiling": ' stroke-dasharray="2 4"'}
    key = []
    for name, colour, words in entries:
        if there.get(name, True):
            line = f'<line x1="1" x2="31" y1="8" y2="8" stroke="{colour}" stroke-width="2"{dashes.get(name, "")}/>'
            svg = f'<svg viewBox="0 0 32 16" aria-hidden="true">{line}{_mark(name, 16, 8, colour)}</svg>'
            key.append((svg, colour, words))
    if curve.knee is not None:
        ring = f'<circle cx="16" cy="8" r="7" fill="none" stroke="{FOUND}" stroke-width="1.5"/>'
        key.append((f'<svg viewBox="0 0 32 16" aria-hidden="true">{ring}</svg>', FOUND, "knee of the curve"))
    return key


def ticks(low: float, high: float) -> list[float]:
    """Round numbers from at most `low` up to at most `high`, two to eight of them."""
    span = high - low or 1.0
    decade = 10.0 ** math.floor(math.log10(span))
    step = next(decade * part for part in (0.2, 0.5, 1.0, 2.0) if span / (decade * part) < 6.5)
    first, last = math.floor(low / step), math.floor(high / step + 1e-9)
    return [step * number for number in range(first, last + 1)]


def _grid(x, y, ticks_x: list[float], ticks_y: list[float], right: float) -> str:
    said = []
    for value in ticks_y:
        colour = "#8A909A" if value == 0 else "#DAD8D0"
        said.append(
            f'<line x1="{LEFT}" x2="{x(right):.1f}" y1="{y(value):.1f}" y2="{y(value):.1f}" stroke="{colour}"/>'
            f'<text x="{LEFT - 5}" y="{y(value) + 4:.1f}" text-anchor="end">{value:g}</text>'
        )
    for value in ticks_x:
        said.append(f'<text x="{x(value):.1f}" y="{y(0) + 17:.1f}" text-anchor="middle">{value:g}</text>')
    return "".join(said)


def _mark(name: str, x: float, y: float, colour: str) -> str:
    if name == "found":
        return f'<circle cx="{x:.1f}" cy="{y:.1f}" r="4" fill="{colour}"/>'
    if name == "even":
        return f'<rect x="{x - 3.2:.1f}" y="{y - 3.2:.1f}" width="6.4" height="6.4" fill="{colour}"/>'
    if name == "standard":
        return f'<path d="M{x:.1f} {y - 4.2:.1f}l4.2 7.4h-8.4z" fill="{colour}"/>'
    return ""


def noise_rows(noise: ChannelNoise) -> list[dict[str, Any]]:
    """Per channel its whole noise, the rms of each part, and each part's share of the variance as bar pieces."""
    sizes = np.stack([np.broadcast_to(part, len(noise.names)) for part in noise.parts.values()])
    whole = np.sqrt((sizes**2).sum(axis=0))
    rows = []
    for channel, unit in enumerate(noise.units):
        scale = UV if unit == "V" else FT
        shares = 100 * sizes[:, channel] ** 2 / (whole[channel] ** 2 or 1.0)
        starts = np.append(0.0, np.cumsum(shares))[:-1]
        rows.append(
            {
                "number": int(noise.sensor[channel]),
                "name": one_line(noise.names[channel]),
                "unit": "µV" if unit == "V" else "fT",
                "whole": _three(whole[channel] / scale),
                "parts": [_three(size / scale) for size in sizes[:, channel]],
                "pieces": [
                    {"start": fixed(float(start), 2), "width": fixed(float(share), 2), "colour": part_colour(index)}
                    for index, (start, share) in enumerate(zip(starts, shares, strict=True))
                    if share >= 0.05
                ],
                "words": ", ".join(
                    f"{one_line(name)} {fixed(float(share), 0)} %"
                    for name, share in zip(noise.parts, shares, strict=True)
                ),
            }
        )
    return rows


def part_colour(index: int) -> str:
    """Colour of the part of the noise with this number (they repeat after five)."""
    return PART_COLOURS[index % len(PART_COLOURS)]


def correlation_png(correlation: np.ndarray) -> str:
    """The correlation (n, n) as base64 of a PNG of n x n pixels: brown for -1, white for 0, blue for 1."""
    from matplotlib.image import imsave

    value = np.clip(correlation, -1, 1)[..., None]
    ends = np.where(value < 0, np.array(NEGATIVE, float), np.array(POSITIVE, float))
    colours = np.array(MIDDLE, float) + np.abs(value) * (ends - np.array(MIDDLE, float))
    file = io.BytesIO()
    imsave(file, np.round(colours).astype(np.uint8), format="png", metadata={"Software": None})
    return base64.b64encode(file.getvalue()).decode("ascii")


def correlation_labels(noise: ChannelNoise) -> list[tuple[str, str]]:
    """(place in per cent, sensor number) along the edge: of each sensor's first channel, every so many."""
    n = len(noise.names)
    every = math.ceil(n / LABELLED)
    firsts = [at for at in range(n) if at == 0 or noise.sensor[at] != noise.sensor[at - 1]]
    return [(fixed(100 * (at + 0.5) / n, 2), str(int(noise.sensor[at]))) for at in firsts[::every]]


def strongest_pairs(noise: ChannelNoise) -> list[tuple[str, str, str]]:
    """The most strongly correlated pairs of channels, strongest first: (name, name, correlation)."""
    first, second = np.triu_indices(len(noise.names), 1)
    order = np.argsort(-np.abs(noise.correlation[first, second]), kind="stable")[:STRONGEST]
    return [
        (
            one_line(noise.names[first[pair]]),
            one_line(noise.names[second[pair]]),
            fixed(float(noise.correlation[first[pair], second[pair]]), 2),
        )
        for pair in order
    ]


def middle_correlation(noise: ChannelNoise) -> str:
    """Median size of the correlation over all pairs of channels; "" for a single channel."""
    pairs = np.abs(noise.correlation[np.triu_indices(len(noise.names), 1)])
    return fixed(float(np.median(pairs)), 2) if len(pairs) else ""


def _three(value: float) -> str:
    """Three significant digits, without exponents for everyday sizes."""
    if value == 0 or not math.isfinite(value):
        return fixed(value, 0, "–")
    return fixed(value, max(0, 2 - math.floor(math.log10(abs(value)))))
