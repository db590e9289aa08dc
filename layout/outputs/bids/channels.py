"""The channels of one layout as BIDS files (Brain Imaging Data Structure 1.11, EEG and MEG), and what a recording's
own sidecar can take from a plan."""

from __future__ import annotations

import json

from layout.brief.objects import Brief, StockBrief
from layout.outputs.bids.electrodes import MISSING, electrode_names, electrodes_of
from layout.outputs.plain import one_line
from layout.outputs.result import DesignResult, RankedLayout, SensorRow

COLUMNS = ("name", "type", "units", "description", "sampling_frequency", "reference", "status")
EEG_TEMPLATE = "eeg-sidecar-template.json"
TO_FILL_IN = "to be filled in"
TASK = "plan"


def reference_name(layout: RankedLayout) -> str:
    """The electrode to connect as reference, n/a where none is named."""
    named = zip(electrode_names(layout), electrodes_of(layout), strict=True)
    return next((name for name, row in named if row.role == "reference"), MISSING)


def eeg_channels_tsv(layout: RankedLayout) -> str:
    """One channel an electrode, but for the reference and the ground, which are electrodes without a channel.

    What only a recording knows (sampling frequency, status) is n/a.
    """
    reference = reference_name(layout)
    lines = ["\t".join(COLUMNS)]
    for name, row in zip(electrode_names(layout), electrodes_of(layout), strict=True):
        if row.role == "":
            cells = (name, "EEG", "µV", one_line(row.kind) or MISSING, MISSING, reference, MISSING)
            lines.append("\t".join(cells))
    return "\n".join(lines) + "\n"


def housed_of(layout: RankedLayout) -> tuple[SensorRow, ...]:
    """The magnetometers and gradiometers of the layout, in placing order."""
    return tuple(row for row in layout.sensors if row.kind_type != "electrode")


def channel_names(row: SensorRow) -> list[str]:
    """The channels of one magnetometer or gradiometer: its own name, numbered where it has several."""
    name = one_line(row.name)
    return [name] if len(row.axes) == 1 else [f"{name} #{number}" for number in range(1, len(row.axes) + 1)]


def meg_channels_tsv(layout: RankedLayout, brief: Brief) -> str:
    """One row a channel of magnetometers and gradiometers; gradiometers read a difference of fields, hence fT."""
    columns = [column for column in COLUMNS if column != "reference"]
    lines = ["\t".join(columns)]
    for row in housed_of(layout):
        kind = meg_type(brief.stock[row.kind_number])
        for name in channel_names(row):
            lines.append("\t".join((name, kind, "fT", one_line(row.kind) or MISSING, MISSING, MISSING)))
    return "\n".join(lines) + "\n"


def meg_type(entry: StockBrief) -> str:
    """The standard's word for the channels of this kind of sensor."""
    if entry.kind == "magnetometer":
        return "MEGMAG"
    return {"axial": "MEGGRADAXIAL", "planar": "MEGGRADPLANAR"}[entry.shape]


def channels_json(kind: str) -> str:
    """The sidecar of a channels table; kind: "EEG" or "MEG"."""
    more = " The reference and the ground are electrodes without a channel." if kind == "EEG" else ""
    content = {"Description": f"{kind} channels of a planned layout; nothing was recorded.{more}"}
    return json.dumps(content, indent=2, ensure_ascii=False) + "\n"


def eeg_sidecar_template(result: DesignResult, layout: RankedLayout) -> str:
    """Start of a recording's *_eeg.json: what the plan settles, and the required keys that only the lab can fill in.

    It is no part of the data set: without a recording such a sidecar belongs to nothing, and a sampling frequency made
    up here would be believed.
    """
    families = [
        entry.sites.family
        for entry in result.brief.stock
        if entry.kind == "electrode" and entry.sites.family is not None
    ]
    rows = electrodes_of(layout)
    ground = next((name for name, row in zip(electrode_names(layout), rows, strict=True) if row.role == "ground"), None)
    reference = reference_name(layout)
    content = {
        "TaskName": TO_FILL_IN,
        "EEGReference": TO_FILL_IN if reference == MISSING else reference,
        "SamplingFrequency": TO_FILL_IN,
        "PowerLineFrequency": TO_FILL_IN,
        "SoftwareFilters": TO_FILL_IN,
        "EEGGround": ground or TO_FILL_IN,
        "EEGChannelCount": sum(row.role == "" for row in rows),
        "EEGPlacementScheme": ", ".join(dict.fromkeys(families)) if families else "planned, see the electrodes table",
    }
    return json.dumps(content, indent=2, ensure_ascii=False) + "\n"
