"""A layout as a small BIDS data set of its own: planned electrodes and channels, without a recording.

It is a derivative in the standard's sense, since a raw data set must hold recordings; so a validator passes it as it
is, and its tables can be copied under a participant's label into the data set of the study.
"""

from __future__ import annotations

import json

from layout.outputs.bids.channels import TASK, channels_json, eeg_channels_tsv, housed_of, meg_channels_tsv
from layout.outputs.bids.electrodes import coordsystem_json, electrodes_json, electrodes_of, electrodes_tsv
from layout.outputs.plain import bound_text, fixed, one_line
from layout.outputs.result import DesignResult, RankedLayout

FOLDER = "bids"
SUBJECT = "sub-plan"
DESCRIPTION = "dataset_description.json"
README = "README.md"
ELECTRODES_TSV = f"{SUBJECT}/eeg/{SUBJECT}_electrodes.tsv"
ELECTRODES_JSON = f"{SUBJECT}/eeg/{SUBJECT}_electrodes.json"
COORDSYSTEM_JSON = f"{SUBJECT}/eeg/{SUBJECT}_coordsystem.json"
EEG_CHANNELS_TSV = f"{SUBJECT}/eeg/{SUBJECT}_task-{TASK}_channels.tsv"
EEG_CHANNELS_JSON = f"{SUBJECT}/eeg/{SUBJECT}_task-{TASK}_channels.json"
MEG_CHANNELS_TSV = f"{SUBJECT}/meg/{SUBJECT}_task-{TASK}_channels.tsv"
MEG_CHANNELS_JSON = f"{SUBJECT}/meg/{SUBJECT}_task-{TASK}_channels.json"
PLACES = frozenset(
    f"{FOLDER}/{name}"
    for name in (
        DESCRIPTION,
        README,
        ELECTRODES_TSV,
        ELECTRODES_JSON,
        COORDSYSTEM_JSON,
        EEG_CHANNELS_TSV,
        EEG_CHANNELS_JSON,
        MEG_CHANNELS_TSV,
        MEG_CHANNELS_JSON,
    )
)


def bids_files(result: DesignResult, layout: RankedLayout) -> dict[str, str]:
    """Place under the layout's folder, as in PLACES -> text of every file that this layout has."""
    files = {DESCRIPTION: _description(result, layout), README: _readme(result, layout)}
    if electrodes_of(layout):
        files |= {
            ELECTRODES_TSV: electrodes_tsv(layout),
            ELECTRODES_JSON: electrodes_json(),
            COORDSYSTEM_JSON: coordsystem_json(result),
            EEG_CHANNELS_TSV: eeg_channels_tsv(layout),
            EEG_CHANNELS_JSON: channels_json("EEG"),
        }
    if housed_of(layout):
        files |= {
            MEG_CHANNELS_TSV: meg_channels_tsv(layout, result.brief),
            MEG_CHANNELS_JSON: channels_json("MEG"),
        }
    return {f"{FOLDER}/{name}": text for name, text in files.items()}


def _description(result: DesignResult, layout: RankedLayout) -> str:
    content = {
        "Name": f"{one_line(result.brief.title)}: layout {layout.rank}",
        "BIDSVersion": "1.11.0",
        "DatasetType": "derivative",
        "GeneratedBy": [{"Name": "scalpsite", "Version": result.version}],
    }
    return json.dumps(content, indent=2, ensure_ascii=False) + "\n"


def _readme(result: DesignResult, layout: RankedLayout) -> str:
    counts = [f"{len(electrodes_of(layout))} x electrode"] if electrodes_of(layout) else []
    counts += [f"{len(housed_of(layout))} x magnetometer or gradiometer"] if housed_of(layout) else []
    lines = [
        f"# Layout {layout.rank}: planned sensor positions",
        "",
        f"{' and '.join(counts)}, planned by model ({fixed(layout.value, 3)} {result.unit}, certified bound "
        f"{bound_text(layout.bound, result.unit)} {result.unit}). Nothing in this data set was measured or recorded.",
        "",
    ]
    if electrodes_of(layout):
        lines += [
            f"To use it for a recording, copy the files of `{SUBJECT}/eeg` into the data set of the study, put the "
            f"participant's label in place of `{SUBJECT.removeprefix('sub-')}` and the task's in place of "
            f"`task-{TASK}`, and replace planned positions by digitised ones where there are any.",
            "",
        ]
    if housed_of(layout):
        lines += [
            "The standard has no table for positions and axes of single magnetometers: they are in `magnetometers.tsv` "
            "beside this data set, with `magnetometers.json`, which defines its columns. Channels have the same names.",
            "",
        ]
    return "\n".join([*lines, "For planning research only: not a medical device.", ""])
