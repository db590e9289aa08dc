"""What the folder of a design holds: every file by name, with its content."""

from __future__ import annotations

import io
import re
from collections.abc import Callable, Iterator
from pathlib import PurePosixPath

from layout.outputs.bids.channels import EEG_TEMPLATE, eeg_sidecar_template, housed_of
from layout.outputs.bids.dataset import PLACES, bids_files
from layout.outputs.bids.electrodes import electrodes_of
from layout.outputs.bids.magnetometers_table import (
    MAGNETOMETERS_JSON,
    MAGNETOMETERS_TSV,
    magnetometers_json,
    magnetometers_tsv,
)
from layout.outputs.cap.template import CAP_FILES, cap_files
from layout.outputs.columns import columns_json
from layout.outputs.evidence_files import CURVE_FILES, PLACEMENT_FILES, curve_files, placement_tables_of
from layout.outputs.helmet.files import HELMET_FILES, helmet_files
from layout.outputs.methods.text import methods_text
from layout.outputs.pictures.figure import Picture, scalp_pictures
from layout.outputs.pictures.files import PICTURE_FILES, picture_files
from layout.outputs.ranking import ranking_json
from layout.outputs.report.page import report_html
from layout.outputs.result import DesignResult, RankedLayout
from layout.outputs.sheet.files import SHEET_FILES, sheet_files
from layout.outputs.tables import polished_csv, ranking_csv, sensors_csv

RANKING = "ranking.json"
REPORT = "report.html"
AUDIT = "audit.npz"
POLISHED = "polished.csv"
Content = str | bytes
Named = Iterator[tuple[str, Content]]

TOP_FILES: dict[str, Callable[[DesignResult], Content]] = {
    RANKING: ranking_json,
    "ranking.csv": ranking_csv,
    "columns.json": lambda result: columns_json(result.unit),
    "methods.txt": methods_text,
}
LAYOUT_FILES: dict[str, Callable[[DesignResult, RankedLayout, Picture], Content]] = {
    "sensors.csv": lambda result, layout, picture: sensors_csv(layout, result.unit),
    "scalp.png": lambda result, layout, picture: picture.png,
    "scalp.svg": lambda result, layout, picture: picture.svg,
    "scalp.pdf": lambda result, layout, picture: picture.pdf,
}
ELECTRODE_FILES: dict[str, Callable[[DesignResult, RankedLayout], Content]] = {
    EEG_TEMPLATE: eeg_sidecar_template,
}
HOUSED_FILES: dict[str, Callable[[DesignResult, RankedLayout], Content]] = {
    MAGNETOMETERS_TSV: magnetometers_tsv,
    MAGNETOMETERS_JSON: magnetometers_json,
}
SHARED = {*TOP_FILES, *CURVE_FILES, POLISHED, AUDIT, REPORT}
OF_ONE_LAYOUT = {
    *LAYOUT_FILES,
    *PLACEMENT_FILES,
    *SHEET_FILES,
    *CAP_FILES,
    *ELECTRODE_FILES,
    *HOUSED_FILES,
    *HELMET_FILES,
    *PICTURE_FILES,
    *PLACES,
}


def is_of_design(path: str) -> bool:
    """Whether a file of this name, seen from the folder of a design, may be one of ours."""
    first, *rest = PurePosixPath(path).parts
    if not rest:
        return first in SHARED
    return re.fullmatch(r"layout-\d+", first) is not None and "/".join(rest) in OF_ONE_LAYOUT


def design_files(result: DesignResult, audit: bool, progress: Callable[[str], None]) -> Named:
    """Name, seen from the folder, and content of every file; the page comes last, as it links to all the others."""
    made = []
    progress("drawing the scalp")
    pictures = scalp_pictures(result)
    for name, content in _before_the_page(result, pictures, audit, progress):
        made.append(name)
        yield name, content
    progress("making the page")
    yield REPORT, report_html(result, pictures, sorted(made))


def _before_the_page(
    result: DesignResult, pictures: tuple[Picture, ...], audit: bool, progress: Callable[[str], None]
) -> Named:
    for name, export in TOP_FILES.items():
        yield name, export(result)
    yield from curve_files(result).items()
    if result.polished is not None:
        yield POLISHED, polished_csv(result)
    if audit:
        yield AUDIT, audit_npz(result)
    for layout, picture in zip(result.layouts, pictures, strict=True):
        progress(f"papers for the bench, layout {layout.rank} of {len(result.layouts)}")
        for name, content in _of_layout(result, layout, picture):
            yield f"layout-{layout.rank}/{name}", content
    progress("drawing cortex and noise")
    for rank, files in picture_files(result):
        yield from ((f"layout-{rank}/{name}", content) for name, content in files.items())
    progress("shaping helmets")
    for rank, files in helmet_files(result):
        yield from ((f"layout-{rank}/{name}", content) for name, content in files.items())


def _of_layout(result: DesignResult, layout: RankedLayout, picture: Picture) -> Named:
    for name, export in LAYOUT_FILES.items():
        yield name, export(result, layout, picture)
    yield from placement_tables_of(result, layout).items()
    yield from sheet_files(result, layout).items()
    yield from cap_files(result, layout).items()
    if electrodes_of(layout):
        yield from ((name, export(result, layout)) for name, export in ELECTRODE_FILES.items())
    if housed_of(layout):
        yield from ((name, export(result, layout)) for name, export in HOUSED_FILES.items())
    yield from bids_files(result, layout).items()


def audit_npz(result: DesignResult) -> bytes:
    """The arrays from which a stranger recomputes values and bound."""
    import numpy as np

    content = io.BytesIO()
    np.savez_compressed(content, **{name: result.audit[name] for name in sorted(result.audit)})
    return content.getvalue()
