"""What the cap template says about itself."""

from __future__ import annotations

from layout.outputs.cap.holes import place_label
from layout.outputs.cap.pattern import Pattern
from layout.outputs.cap.piece import ALLOWANCE
from layout.outputs.cap.tiles import OVERLAP
from layout.outputs.plain import fixed, one_line
from layout.outputs.result import DesignResult
from layout.units import MM

FOOT = "For planning research: not a medical device. The makers' instructions for electrodes and gel come first."


def strain_sentence(pattern: Pattern) -> str:
    """How true lengths on paper are."""
    flats = [gore.flat for gore in pattern.cap.gores]
    low = 100 * (min(float(flat.stretch.min()) for flat in flats) - 1)
    high = 100 * (max(float(flat.stretch.max()) for flat in flats) - 1)
    rms = 100 * pattern.cap.rms
    return (
        f"{len(flats)} gores, each the scalp's own surface laid flat. Lengths on paper are {fixed(low, 1)} % to "
        f"+{fixed(high, 1)} % off, {fixed(rms, 1)} % rms; tinted where more than 1.5 or 3 %, blue: paper shorter than "
        "the scalp, orange: longer."
    )


def seam_sentence(pattern: Pattern) -> str:
    """How well seams match, and how far they stay from holes."""
    mismatch = max(abs(seam.flat_lengths[0] - seam.flat_lengths[1]) for seam in pattern.cap.seams) / MM
    nearest = min(pattern.cap.clearance) / MM
    met = sum(not hole.own for piece in pattern.pieces for hole in piece.holes)
    text = f"The two sides of every seam differ by {fixed(mismatch, 1)} mm at most"
    if met:
        return f"{text}; holes that a seam crosses are drawn in part on both gores ({met})."
    return f"{text}; seams keep {fixed(nearest, 1)} mm or more from the edge of every hole."


def joining_order(pattern: Pattern) -> str:
    """Which gores to join, from the middle outwards."""
    seams = sorted(pattern.cap.seams, key=lambda seam: abs(seam.gores[0] + seam.gores[1] - len(pattern.pieces) + 1))
    names = [piece.gore.name for piece in pattern.pieces]
    return ", ".join(f"{names[seam.gores[0]]}-{names[seam.gores[1]]} (seam {seam.name})" for seam in seams)


def steps(pattern: Pattern) -> tuple[str, ...]:
    """What to do, in order."""
    return (
        "Print at 100 % (actual size), on one side. Both check bars of each page must measure 100 mm.",
        f"Where a gore goes over two pages: cut the page along its dashed edge, lay it over the {fixed(OVERLAP, 0)} mm "
        "strip of its neighbour so that the diamonds with the same label meet, and tape.",
        f"Cloth: cut along the outer solid line ({fixed(ALLOWANCE, 0)} mm allowance for seam and hem included). Paper "
        "cap, to try the size: cut along the dashed seam lines and the dash-dot rim.",
        "The printed side is the outside of the cap; arrows point to the front.",
        f"Join from the middle outwards, matching notches of the same label: {joining_order(pattern)}.",
        "Cut the holes. Check on the head: midline over nasion and inion, ear line over both preauricular points, at "
        "the distances written at the ends of these lines.",
    )


def weaknesses(result: DesignResult, pattern: Pattern) -> tuple[str, ...]:
    """What to know about the template."""
    notes = [
        strain_sentence(pattern),
        seam_sentence(pattern),
        f"Rim: {fixed(pattern.rim_length / MM, 0)} mm along the skin, dips for low sensors included: not the "
        "circumference that is measured level. No ease and no stretch are built in: "
        "for cloth that stretches make it smaller by what your cloth gives; chin strap and ear openings are yours.",
    ]
    if any(shape.assumed for shape in pattern.shapes):
        whose = "the electrodes" if all(shape.assumed for shape in pattern.shapes) else "some electrodes"
        notes.append(
            f"The brief gives no footprint for {whose}: their holes are drawn 10 mm wide. Compare with your holders "
            "before you cut."
        )
    if pattern.left_out:
        left = ", ".join(f"{row.number} ({one_line(row.site)})" for row in pattern.left_out)
        notes.append(f"Worn on the earlobe, no hole: {left}.")
    kind = result.brief.head.kind
    if kind == "template":
        notes.append("The head is an average without hair or ears: try a paper cap on the wearer first.")
    elif kind == "sphere":
        notes.append("The head is a sphere: this template shows the method and fits nobody.")
    else:
        notes.append("Hair takes room that the head's surface does not have: try a paper cap first.")
    return tuple(notes)


def hole_list(pattern: Pattern) -> list[str]:
    """One line per hole: number, site, its gore, the nearest standard position, role."""
    gore_of = {hole.row.number: piece.gore.name for piece in pattern.pieces for hole in piece.holes if hole.own}
    lines = []
    for row, shape in zip(pattern.rows, pattern.shapes, strict=True):
        size = fixed(shape.width / MM, 1).removesuffix(".0")
        if not shape.round:
            size += " x " + fixed(shape.depth / MM, 1).removesuffix(".0")
        role = f", {row.role}" if row.role else ""
        site, label = one_line(row.site), place_label(row)
        where = site if site == label else f"{site}, {label}"
        lines.append(f"{row.number}  {where}; gore {gore_of[row.number]}; {size} mm{role}")
    return lines
