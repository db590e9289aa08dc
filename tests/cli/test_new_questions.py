"""`layout new` asked in a terminal of the tests' own, and its silence in a pipe."""

import json
import subprocess
import sys
from dataclasses import replace

import pytest
from click.testing import CliRunner
from shown import CONTROL, ROOT, spawned, whole_output

from layout.brief.parse import load_brief
from layout.brief.starter import STARTER_KINDS, brief_text, starter_brief, usual_answers
from layout.brief.starter_places import NAMED, UNDER_POSITION, WHERE, place_at
from layout.brief.starter_questions import MOST_SENSORS
from layout.cli import asking, cli
from layout.design.region_reach import NEAR, check_near_cortex
from layout.errors import BriefError


def in_terminal(folder, words, said):
    """Answer every question; the whole of what was shown, and the exit status."""
    child, shown = spawned("-m", "layout", "new", *words, folder=folder), ""
    for answer in said:
        child.expect(r"\] > ", timeout=30)
        shown += child.before + child.after
        child.sendline(answer)
    shown += whole_output(child)
    return CONTROL.sub("", shown), child.exitstatus


def test_answers_are_checked_asked_again_and_written(tmp_path):
    said = ["hat", "helmet", "12", "560", "0 0 10; C3", "C3; -38 -24 56", "top", "13", "8", "4000", "9000", "500", ""]
    shown, status = in_terminal(tmp_path, [], said)
    assert status == 0
    together = " ".join(shown.split())
    for sentence in (
        '"cap", "helmet" or "budget", but "hat" was given.',
        "a circumference from 440 to 680 mm",
        'within 12 mm of the average cortex, but "0 0 10" is 21 mm from it.',
        'a whole number from 1 to 12 (top), but "13" was given.',
        'a sum from 0 to 4000, so that the budget buys 1, but "9000" was given.',
        "Written to helmet.toml",
    ):
        assert sentence in together
    assert max(map(len, shown.splitlines())) <= 80
    brief = load_brief(tmp_path / "helmet.toml")
    assert brief.title == "8 magnetometers: under C3, at -38 -24 56"
    assert (brief.head.size.circumference, brief.stock[0].count, brief.budget.total) == (0.56, 8, 4000)
    assert [region.side for region in brief.regions] == ["left", "left"]


def test_enter_all_through_writes_the_starter(tmp_path):
    _, status = in_terminal(tmp_path, ["budget", "--out", "mine.toml"], [""] * 6)
    assert status == 0
    assert (tmp_path / "mine.toml").read_text(encoding="utf-8") == starter_brief("budget")


def test_ctrl_c_and_the_end_of_the_answers_write_nothing(tmp_path):
    for key in ("sendintr", "sendeof"):
        child = spawned("-m", "layout", "new", folder=tmp_path)
        child.expect(r"\] > ", timeout=30)
        getattr(child, key)()
        assert "Stopped." in whole_output(child)
        assert child.exitstatus == 130
    assert list(tmp_path.iterdir()) == []


def test_a_file_that_is_there_is_told_before_the_questions(tmp_path):
    (tmp_path / "cap.toml").write_text("mine")
    shown, status = in_terminal(tmp_path, ["cap"], [])
    assert status == 2
    assert "'cap.toml' must not exist yet" in " ".join(shown.split())


@pytest.mark.parametrize("word", ["--defaults", "--quiet"])
def test_on_a_terminal_no_questions_if_none_are_wanted(tmp_path, monkeypatch, word):
    monkeypatch.chdir(tmp_path)
    monkeypatch.setattr(asking, "on_a_terminal", lambda: True)
    said = CliRunner().invoke(cli, ["new", "cap", word], input="")
    assert said.exit_code == 0
    assert said.stderr == ""
    assert (tmp_path / "cap.toml").read_text(encoding="utf-8") == starter_brief("cap")


def test_questions_leave_standard_output_to_the_json(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    monkeypatch.setattr(asking, "on_a_terminal", lambda: True)
    said = CliRunner().invoke(cli, ["new", "--json"], input="\n" * 8)
    assert said.exit_code == 0, said.output
    assert json.loads(said.stdout)["file"] == "cap.toml"
    assert "Which head?" in said.stderr


def test_a_pipe_never_waits(tmp_path):
    def piped(*words):
        command = [sys.executable, "-m", "layout", "new", *words]
        env = {"PYTHONPATH": str(ROOT), "PATH": ""}
        return subprocess.run(
            command, cwd=tmp_path, env=env, stdin=subprocess.PIPE, capture_output=True, text=True, timeout=20
        )

    missing = piped()
    assert (missing.returncode, missing.stdout) == (2, "")
    assert "KIND must be given: cap, helmet or budget." in missing.stderr
    assert piped("cap").returncode == 0
    assert (tmp_path / "cap.toml").read_text(encoding="utf-8") == starter_brief("cap")


def test_positions_and_places_lie_at_the_cortex_and_the_middle_of_the_head_does_not():
    for name, centre in UNDER_POSITION.items():
        check_near_cortex(centre, place_at(name, centre, 15).side)
    for place in NAMED.values():
        check_near_cortex(place.centre, place.side)
    with pytest.raises(BriefError, match=rf'within {NEAR:g} mm of the average cortex, but "0 0 10" is 21 mm from it'):
        check_near_cortex((0, 0, 10), "both")


@pytest.mark.slow
def test_positions_stand_over_their_regions():
    """The standard position nearest to each region's sources is its own, or next to it, by the template's arcs."""
    import numpy as np

    from layout.anatomy.build import build_head
    from layout.anatomy.frame import apply
    from layout.anatomy.positions import standard_positions
    from layout.brief.default_heads import DEFAULT_CONDUCTIVITIES
    from layout.brief.objects import HeadBrief

    head = build_head(HeadBrief("template", DEFAULT_CONDUCTIVITIES[3]))
    standard = standard_positions(head.scalp, head.landmarks)
    listed = np.array([standard[name] for name in UNDER_POSITION])
    for name, centre in UNDER_POSITION.items():
        point = apply(head.mni_to_head, np.array(centre) * 1e-3)
        away = np.linalg.norm(listed - point, axis=1)
        assert list(UNDER_POSITION)[int(np.argmin(away))] == name
        assert away.min() < 26e-3


@pytest.mark.slow
@pytest.mark.parametrize("kind", STARTER_KINDS)
def test_the_most_that_may_be_asked_for_fits_the_smallest_and_the_largest_head(kind, tmp_path):
    """What `layout check` accepts, before it draws: grids are tightest on a small head, zones on a large one."""
    from layout.design import lay_out_study

    for where in WHERE:
        for size in (440,) if where == "whole scalp" else (440, 680) if kind != "helmet" else (680,):
            most = MOST_SENSORS[kind][where]
            answers = replace(usual_answers(kind), where=where, count=most, head=f"circumference_mm = {size}")
            (tmp_path / "study.toml").write_text(brief_text(answers), encoding="utf-8")
            assert lay_out_study(load_brief(tmp_path / "study.toml")).feasible.counts.sum() == most
