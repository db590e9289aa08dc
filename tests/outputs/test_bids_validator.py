"""The data set that a layout is written as, before the standard's own validator (bids-validator-deno, from PyPI)."""

import json
import subprocess

import numpy as np
import pytest

from layout.outputs.bids.channels import TO_FILL_IN, eeg_sidecar_template
from layout.outputs.bids.dataset import EEG_CHANNELS_TSV, ELECTRODES_TSV, bids_files

pytestmark = pytest.mark.slow
# Warnings, looked at one by one. Of a plan: its authors are for those who publish it to name.
OF_A_PLAN = {("TOO_FEW_AUTHORS", None)}
# Of a study with a recording: what belongs to that study, its amplifier and its place (events, maker, institution,
# filters, duration), and fiducials, in whose stead the anatomical landmarks are given.
OF_A_STUDY = {"EVENTS_TSV_MISSING", "SIDECAR_KEY_RECOMMENDED", "JSON_KEY_RECOMMENDED", "NO_AUTHORS", "TOO_FEW_AUTHORS"}


def _written(files, folder):
    for name, text in files.items():
        place = folder / name
        place.parent.mkdir(parents=True, exist_ok=True)
        place.write_text(text, encoding="utf-8")
    return folder


def _issues(folder, severity):
    """(code, what about, file) of every issue of this severity."""
    answer = subprocess.run(
        ["bids-validator-deno", "--format", "json", str(folder)], capture_output=True, encoding="utf-8", check=False
    )
    issues = json.loads(answer.stdout)["issues"]["issues"]
    return {(one["code"], one.get("subCode"), one.get("location")) for one in issues if one["severity"] == severity}


@pytest.fixture(scope="module")
def plan(result):
    return {name.removeprefix("bids/"): text for name, text in bids_files(result, result.layouts[0]).items()}


def _study(result, plan, folder, template):
    """A raw data set: the plan's files, and a recording of a second with the channels of the plan."""
    import edfio

    files = {name: text for name, text in plan.items() if "/eeg/" in name}
    files["dataset_description.json"] = json.dumps({"Name": "A study", "BIDSVersion": "1.11.0", "DatasetType": "raw"})
    files["README.md"] = "A study of which nothing is real but the plan of its electrodes. " * 5
    files["sub-plan/eeg/sub-plan_task-plan_eeg.json"] = template
    files["participants.tsv"] = "participant_id\nsub-plan\n"
    _written(files, folder)
    channels = [line.split("\t")[0] for line in plan[EEG_CHANNELS_TSV].splitlines()[1:]]
    noise = np.random.default_rng(1).normal(size=256)
    signals = [edfio.EdfSignal(noise, 256, label=f"E{k}", physical_dimension="uV") for k in range(len(channels))]
    edfio.Edf(signals).write(folder / "sub-plan/eeg/sub-plan_task-plan_eeg.edf")
    return folder


def test_the_plan_is_a_valid_data_set_as_it_is(plan, tmp_path):
    folder = _written(plan, tmp_path)
    assert _issues(folder, "error") == set()
    assert {issue[:2] for issue in _issues(folder, "warning")} <= OF_A_PLAN


@pytest.mark.parametrize(
    ("place", "old", "new", "code"),
    [
        (ELECTRODES_TSV, "name\tx\ty\tz", "name\tx\tz\ty", "TSV_COLUMN_ORDER_INCORRECT"),
        (ELECTRODES_TSV, "n/a\tn/a\tn/a\treference", "n/a\tn/a\tbad\treference", "TSV_VALUE_INCORRECT_TYPE"),
        (EEG_CHANNELS_TSV, "\tEEG\t", "\tBRAIN\t", "TSV_VALUE_INCORRECT_TYPE"),
    ],
)
def test_the_validator_reads_our_tables(plan, tmp_path, place, old, new, code):
    assert old in plan[place]
    errors = _issues(_written(plan | {place: plan[place].replace(old, new)}, tmp_path), "error")
    assert (code, f"/{place}") in {(issue[0], issue[2]) for issue in errors}


def test_the_plan_serves_a_recording_once_its_sidecar_is_filled_in(result, plan, tmp_path):
    template = eeg_sidecar_template(result, result.layouts[0])
    content = json.loads(template)
    open_keys = {key for key, value in content.items() if value == TO_FILL_IN}
    assert open_keys >= {"TaskName", "SamplingFrequency", "PowerLineFrequency", "SoftwareFilters"}
    errors = _issues(_study(result, plan, tmp_path / "open", template), "error")
    assert errors  # a template that is left as it is does not pass
    known = {"TaskName": "plan", "SamplingFrequency": 256, "PowerLineFrequency": 50, "SoftwareFilters": "n/a"}
    filled = json.dumps(content | known)
    folder = _study(result, plan, tmp_path / "filled", filled)
    assert _issues(folder, "error") == set()
    warnings = _issues(folder, "warning")
    assert {issue[0] for issue in warnings} <= OF_A_STUDY
    assert "EEGPlacementScheme" not in {issue[1] for issue in warnings}  # the template has it
