"""The evidence of a design as files of its folder."""

from __future__ import annotations

from layout.outputs.curve_tables import curve_columns, curve_csv
from layout.outputs.pictures.curve_figure import curve_picture
from layout.outputs.placement_tables import losses_csv, placement_csv, substitutes_csv
from layout.outputs.result import DesignResult, RankedLayout

CURVE_FILES = ("curve.csv", "curve-columns.json", "curve.png", "curve.svg", "curve.pdf")
PLACEMENT_FILES = {
    "placement.csv": placement_csv,
    "substitutes.csv": substitutes_csv,
    "expected_loss.csv": losses_csv,
}


def curve_files(result: DesignResult) -> dict[str, str | bytes]:
    """Name -> content; nothing where no curve was traced."""
    if result.evidence is None or result.evidence.curve is None:
        return {}
    curve = result.evidence.curve
    picture = curve_picture(curve)
    contents = (curve_csv(curve), curve_columns(curve), picture.png, picture.svg, picture.pdf)
    return dict(zip(CURVE_FILES, contents, strict=True))


def placement_tables_of(result: DesignResult, layout: RankedLayout) -> dict[str, str]:
    """Name -> content for one layout; nothing where its placement was not examined."""
    if result.evidence is None or not result.evidence.placements:
        return {}
    found = result.evidence.placements[layout.rank - 1]
    return {name: table(found) for name, table in PLACEMENT_FILES.items()}
