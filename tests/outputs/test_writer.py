"""The output folder: complete or not there, and never over someone else's files."""

import dataclasses
import json
import re
import zipfile

import numpy as np
import pytest
from made_result import make_result

from layout.cli.stages import WRITE
from layout.errors import FileError
from layout.outputs import design_files
from layout.outputs.pictures.figure import Picture
from layout.outputs.report import page as report
from layout.outputs.writer import check_out_dir, write_result


@pytest.fixture(autouse=True)
def _drawn_once(monkeypatch):
    """The pictures have their own tests; here only that they arrive."""
    stub = lambda result: tuple(Picture(b"png%d" % k.rank, b"svg%d" % k.rank) for k in result.layouts)  # noqa: E731
    monkeypatch.setattr(design_files, "scalp_pictures", stub)
    monkeypatch.setattr(design_files, "picture_files", lambda result: [])  # tests/outputs/test_paper_pictures.py
    monkeypatch.setattr(report, "webp", lambda png: png)
    monkeypatch.setattr(design_files, "sheet_files", lambda result, layout: {})  # tests/outputs/test_sheet_files.py
    monkeypatch.setattr(design_files, "cap_files", lambda result, layout: {})  # tests/outputs/test_cap_template.py
    monkeypatch.setattr(design_files, "helmet_files", lambda result: ())  # tests/outputs/test_helmet_files.py


def _files(folder):
    return {str(path.relative_to(folder)): path.read_bytes() for path in folder.rglob("*") if path.is_file()}


def _everything(folder):
    return sorted(str(path.relative_to(folder)) for path in folder.rglob("*"))


TOP = {"ranking.json", "ranking.csv", "columns.json", "methods.txt", "report.html"}
EACH = {"sensors.csv", "scalp.png", "scalp.svg", "scalp.pdf"}
STANDARD = {"bids/dataset_description.json", "bids/README.md"}
MEG_CHANNELS = {f"bids/sub-plan/meg/sub-plan_task-plan_channels.{ending}" for ending in ("tsv", "json")}
HOUSED = {"magnetometers.tsv", "magnetometers.json"} | MEG_CHANNELS
ELECTRODES = {"eeg-sidecar-template.json"} | {
    f"bids/sub-plan/eeg/sub-plan_{name}"
    for name in (
        "electrodes.tsv",
        "electrodes.json",
        "coordsystem.json",
        "task-plan_channels.tsv",
        "task-plan_channels.json",
    )
}


def test_all_files_are_there(result, tmp_path):
    out = write_result(result, tmp_path / "deep" / "out")
    files = _files(out)
    each = EACH | STANDARD | HOUSED | ELECTRODES
    assert set(files) == TOP | {f"layout-{rank}/{name}" for rank in (1, 2, 3) for name in each}
    assert files["layout-2/scalp.png"] == b"png2"
    assert files["layout-3/scalp.svg"] == b"svg3"
    assert _everything(tmp_path / "deep")[0] == "out"  # no hidden sibling is left
    assert sum(path.startswith(".") for path in _everything(tmp_path / "deep")) == 0


def test_what_is_being_made_is_told_in_the_order_of_the_stages(result, tmp_path):
    told = []
    write_result(result, tmp_path / "out", progress=told.append)
    stages = [next(place for place, stage in enumerate(WRITE) if re.match(stage.says, doing)) for doing in told]
    assert stages == sorted(stages)
    assert set(stages) == set(range(len(WRITE)))


def test_no_electrodes_no_electrode_files(magnetometers_only, tmp_path):
    files = _files(write_result(magnetometers_only, tmp_path / "out"))
    own = {name.removeprefix("layout-1/") for name in files if name.startswith("layout-1/")}
    assert own == EACH | STANDARD | HOUSED


def test_same_result_same_bytes(tmp_path):
    first = _files(write_result(make_result(), tmp_path / "a", audit=True))
    second = _files(write_result(make_result(), tmp_path / "b", audit=True))
    assert first == second


def test_audit_only_when_asked_and_readable(result, tmp_path):
    assert "audit.npz" not in _files(write_result(result, tmp_path / "without"))
    out = write_result(result, tmp_path / "with", audit=True)
    with np.load(out / "audit.npz") as arrays:
        assert set(arrays) == set(result.audit)
        np.testing.assert_array_equal(arrays["target"], result.audit["target"])
    assert {entry.date_time[0] for entry in zipfile.ZipFile(out / "audit.npz").infolist()} == {1980}  # no clock


@pytest.mark.parametrize("problem", [RuntimeError("boom"), KeyboardInterrupt(), OSError(28, "No space left")])
def test_nothing_half_written(result, tmp_path, monkeypatch, problem):
    def fail(result, layout, picture):
        if layout.rank == 2:
            raise problem
        return "fine"

    monkeypatch.setitem(design_files.LAYOUT_FILES, "sensors.csv", fail)
    expected = FileError if isinstance(problem, OSError) else type(problem)
    with pytest.raises(expected):
        write_result(result, tmp_path / "new" / "deep" / "out")
    assert _everything(tmp_path) == []


def test_an_earlier_output_survives_a_failure(result, tmp_path, monkeypatch):
    out = write_result(result, tmp_path / "out")
    before = _files(tmp_path)

    def fail(result, pictures, beside):
        raise KeyboardInterrupt

    monkeypatch.setattr(design_files, "report_html", fail)
    with pytest.raises(KeyboardInterrupt):
        write_result(result, out)
    assert _files(tmp_path) == before


def test_an_earlier_output_comes_back_if_the_last_rename_fails(result, tmp_path, monkeypatch):
    out = write_result(result, tmp_path / "out")
    before = _files(tmp_path)
    rename = type(out).rename

    def refuse(self, target):
        if self.name.endswith(".partial"):
            raise OSError(5, "Input/output error")
        return rename(self, target)

    monkeypatch.setattr(type(out), "rename", refuse)
    with pytest.raises(FileError, match="Input/output error"):
        write_result(result, out)
    assert _files(tmp_path) == before


def test_an_earlier_output_is_replaced_whole(result, tmp_path):
    out = write_result(result, tmp_path / "out", audit=True)
    fewer = dataclasses.replace(result, layouts=result.layouts[:1])
    assert write_result(fewer, out) == out
    assert "layout-2/sensors.csv" not in _files(out)
    assert "audit.npz" not in _files(out)
    assert len(json.loads((out / "ranking.json").read_text(encoding="utf-8"))["layouts"]) == 1
    assert [path.name for path in tmp_path.iterdir()] == ["out"]


def test_an_empty_folder_is_taken(result, tmp_path):
    (tmp_path / "out").mkdir()
    assert "ranking.json" in _files(write_result(result, tmp_path / "out"))


def _foreign_folder(out, result):
    out.mkdir()
    (out / "thesis.txt").write_text("mine")


def _foreign_ranking(out, result):
    out.mkdir()
    (out / "ranking.json").write_text('{"teams": ["A", "B"]}')


def _broken_ranking(out, result):
    out.mkdir()
    (out / "ranking.json").write_text("{")


def _own_notes_inside(out, result):
    write_result(result, out)
    (out / "layout-1" / "notes.md").write_text("measured on Monday")


def _a_file(out, result):
    out.write_text("a file")


def _folders_only(out, result):
    (out / "kept" / "empty").mkdir(parents=True)


@pytest.mark.parametrize(
    ("prepare", "rule"),
    [
        (_foreign_folder, "holds something else"),
        (_foreign_ranking, "holds something else"),
        (_broken_ranking, "holds something else"),
        (_own_notes_inside, r"also holds 'layout-1/notes\.md'"),
        (_a_file, "is a file"),
        (_folders_only, "holds something else"),
    ],
)
def test_other_peoples_files_are_refused_and_untouched(result, tmp_path, prepare, rule):
    out = tmp_path / "out"
    prepare(out, result)
    before, listed = _files(tmp_path), _everything(tmp_path)
    with pytest.raises(FileError, match=rule) as refusal:
        write_result(result, out)
    assert "\n" not in str(refusal.value)
    assert _files(tmp_path) == before
    assert _everything(tmp_path) == listed


def test_the_current_folder_is_refused(result, tmp_path, monkeypatch):
    (tmp_path / "here" / "below").mkdir(parents=True)
    monkeypatch.chdir(tmp_path / "here" / "below")
    for name in (".", ".."):
        with pytest.raises(FileError, match="current folder"):
            check_out_dir(name)
    assert check_out_dir("out") == tmp_path / "here" / "below" / "out"


def test_a_folder_under_a_file_is_one_sentence(result, tmp_path):
    (tmp_path / "file").write_text("x")
    with pytest.raises(FileError, match="cannot be written"):
        write_result(result, tmp_path / "file" / "out")
    assert _everything(tmp_path) == ["file"]
