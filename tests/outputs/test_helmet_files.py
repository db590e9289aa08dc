"""The helmet's files in the output folder: which there are, when, and that they are complete."""

import dataclasses

import pytest
from helmet_cases import helmet_case, slot_case

from layout.outputs import design_files, writer
from layout.outputs.helmet import files as files_of
from layout.outputs.helmet.files import CLASHES, HELMET_FILES, helmet_files

ALWAYS = set(HELMET_FILES) - {CLASHES}


def test_every_file_once_and_no_table_of_clashes_where_there_are_none():
    ((rank, files),) = helmet_files(slot_case())
    assert rank == 1
    assert set(files) == ALWAYS
    assert all(len(content) > 500 for content in files.values())
    assert sum(len(content) for content in files.values()) < 5e6


def test_no_housings_no_files(electrodes_only):
    assert list(helmet_files(electrodes_only)) == []


def test_clashes_get_a_table():
    result = slot_case()
    candidates, (layout,) = result.candidates, result.layouts
    poses = candidates.housing_pose.copy()
    first, second = layout.sensors
    poses[second.candidate] = poses[first.candidate]
    poses[second.candidate, :3, 3] += 0.004 * poses[first.candidate, :3, 0]
    met = dataclasses.replace(result, candidates=dataclasses.replace(candidates, housing_pose=poses))
    ((_, files),) = helmet_files(met)
    assert set(files) == ALWAYS | {CLASHES}
    assert "two housings,1,touches normal+tangent1,2,stops normal+tangent2,8.000" in files[CLASHES]


def test_the_writer_puts_them_beside_the_layout_and_knows_them_again(tmp_path, monkeypatch):
    ranking = {design_files.RANKING: lambda result: '{"schema": 1, "layouts": []}'}
    monkeypatch.setattr(design_files, "TOP_FILES", ranking)  # pictures, page and the shell have their own tests
    monkeypatch.setattr(design_files, "LAYOUT_FILES", {})
    for name, stub in (
        ("scalp_pictures", lambda result: (None,) * len(result.layouts)),
        ("picture_files", lambda result: []),
        ("sheet_files", lambda result, layout: {}),
        ("report_html", lambda *_: "page"),
    ):
        monkeypatch.setattr(design_files, name, stub)
    monkeypatch.setattr(files_of, "helmet_shell_stl", lambda *_: b"shell")
    out = writer.write_result(slot_case(), tmp_path / "out")
    assert {path.name for path in (out / "layout-1").iterdir()} >= ALWAYS
    assert (out / "layout-1" / "helmet-shell.stl").read_bytes() == b"shell"
    writer.check_out_dir(out)
    (out / "layout-1" / "helmet-notes.txt").write_text("mine")
    with pytest.raises(writer.FileError, match="helmet-notes"):
        writer.check_out_dir(out)


def test_one_sensor_alone_has_no_neighbour():
    case = helmet_case()
    layout = dataclasses.replace(case.layouts[0], sensors=case.layouts[0].sensors[:1])
    ((_, files),) = helmet_files(dataclasses.replace(case, layouts=(layout,)))
    assert '"nearest_housing": null' in files["helmet-poses.json"]
    assert "No housing meets another, the scalp or an electrode." in files["helmet-poses.json"]
    assert "nan" not in files["helmet-poses.csv"]
    assert "inf" not in files["helmet-poses.csv"].split("\n", 1)[1]
