"""Curves end to end on a sphere head, and the command that writes them."""

import csv
from itertools import pairwise

import numpy as np
import pytest
from click.testing import CliRunner
from studies import BAND, SPHERE, TWO_REGIONS, brief_of, cups, problem_of

from layout.cli import cli
from layout.design.curve import curve, parse_amounts, run_key
from layout.engine.information import information
from layout.errors import BriefError, InfeasibleError
from layout.outputs.curve_folder import CurveFolder

QUICK = "[search]\nstarts = 3\nproof_parts = 10\n"
FEW = (SPHERE, TWO_REGIONS, cups(6, 'family = "10-20"'), BAND, QUICK)
MM_GOAL = '[goal]\nkind = "localisation"\n'
COUNTS = parse_amounts("count", "3:9:2")
TEXT = 'schema = 1\ntitle = "A study"\n' + "\n".join(FEW)


@pytest.mark.parametrize("nested", [True, False])
def test_values_rise_under_their_bounds_and_under_the_ceiling(nested):
    found = curve(brief_of(*FEW), COUNTS, nested)
    model = problem_of(*FEW).model
    assert [one.sensors for one in found.points] == [3, 5, 7, 9]
    for one in found.points:
        assert one.value == pytest.approx(information(model, np.array(one.chosen)), rel=1e-9)
        assert one.even_spread - 1e-9 <= one.bound
        assert one.value <= one.bound + 1e-9
        assert one.bound <= found.ceiling + 1e-6
        every = [information(model, np.append(one.chosen, new)) for new in range(19) if new not in one.chosen]
        assert one.next_value == pytest.approx(max(every), rel=1e-8)
        equal = one.equals_even_spread_of
        assert equal is None or equal >= one.sensors
    for smaller, larger in pairwise(found.points):
        assert smaller.value < larger.value
        assert not nested or set(smaller.chosen) < set(larger.chosen)
    assert found.ceiling == pytest.approx(information(model, np.arange(19)), rel=1e-9)


def test_errors_fall_above_their_bounds():
    found = curve(brief_of(*FEW, MM_GOAL), parse_amounts("count", "3,6"))
    first, last = found.points
    assert found.unit == "mm"
    assert first.value > last.value >= last.bound >= found.ceiling
    assert first.bound <= first.value
    assert last.next_value < last.value
    assert 0 < found.share(first.value) < found.share(last.value) < 100


def test_more_money_buys_no_less():
    priced = cups(12, 'family = "10-20"', "price = 10\nprice_per_channel = 2\n")
    brief = brief_of(SPHERE, TWO_REGIONS, priced, BAND, QUICK, "[budget]\ntotal = 150\n")
    found = curve(brief, parse_amounts("budget", "40:100:30"))
    for one in found.points:
        assert one.cost == 12 * one.sensors <= one.spent
        assert one.value <= one.bound + 1e-9
    assert [one.sensors for one in found.points] == [3, 5, 8]
    with pytest.raises(BriefError, match="--budgets"):
        curve(brief_of(*FEW), parse_amounts("budget", "40,50"))


@pytest.mark.slow
def test_a_run_cut_short_goes_on_and_gives_the_same_bytes(tmp_path):
    brief, counts = brief_of(*FEW), parse_amounts("count", "3,5,6")
    key = run_key(brief, counts, False)

    def run(name, stop_after=None):
        folder, kept = CurveFolder(tmp_path / name, key), []

        def keep(point):
            folder.keep(point)
            kept.append(point.spent)
            if len(kept) == stop_after:
                raise KeyboardInterrupt

        folder.finish(curve(brief, counts, False, folder.known, keep))
        return kept

    assert run("whole") == [3, 5, 6]
    with pytest.raises(KeyboardInterrupt):
        run("cut", stop_after=2)
    assert not (tmp_path / "cut" / "curve.csv").exists()
    assert run("cut") == [6]
    names = sorted(path.relative_to(tmp_path / "whole") for path in (tmp_path / "whole").rglob("*") if path.is_file())
    assert len(names) == 8
    for name in names:
        assert (tmp_path / "cut" / name).read_bytes() == (tmp_path / "whole" / name).read_bytes(), name
    damaged = tmp_path / "cut" / "points" / "point-5.json"
    damaged.write_text(damaged.read_text()[:50])
    assert run("cut") == [5]
    assert CurveFolder(tmp_path / "cut", run_key(brief, counts, True)).known(5) is None


@pytest.mark.parametrize("text", ["", "4:2:1", "4:8:0", "3,3", "8,4", "x", "0,4", "2.5,3", "1:1e9:1", "4:8", "nan,4"])
def test_amounts_that_are_none_are_refused(text):
    with pytest.raises(BriefError, match=r"--counts: must be first:last:step"):
        parse_amounts("count", text)


def test_amounts_with_the_last_included():
    assert parse_amounts("count", "4:12:4").values == (4, 8, 12)
    assert parse_amounts("count", "4:11:4").values == (4, 8)
    assert parse_amounts("budget", "0.1:0.3:0.1").values == pytest.approx((0.1, 0.2, 0.3))


def test_impossible_counts_are_told_at_once():
    with pytest.raises(InfeasibleError, match=r"--counts.*no layout of 20"):
        curve(brief_of(*FEW), parse_amounts("count", "4,20"))


def test_the_command_writes_a_folder_and_fits_a_terminal(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    monkeypatch.setenv("COLUMNS", "80")
    (tmp_path / "study.toml").write_text(TEXT)
    done = CliRunner().invoke(cli, ["curve", "study.toml", "--counts", "3,5,8", "--nested", "--out", "there"])
    assert done.exit_code == 0, done.output
    assert max(len(line) for line in done.output.splitlines()) <= 80
    assert "Ceiling: all candidates at once (19 channels)" in done.output
    with (tmp_path / "there" / "curve.csv").open() as file:
        rows = list(csv.DictReader(file))
    assert [row["count"] for row in rows] == ["3", "5", "8"]
    assert (tmp_path / "there" / "curve.png").read_bytes().startswith(b"\x89PNG")
    refused = CliRunner().invoke(cli, ["curve", "study.toml", "--counts", "3,50", "--out", "there"])
    assert refused.exit_code == 2
    assert CliRunner().invoke(cli, ["curve", "study.toml"]).exit_code == 2
    (tmp_path / "there" / "mine.txt").write_text("mine")
    refused = CliRunner().invoke(cli, ["curve", "study.toml", "--counts", "3", "--out", "there"])
    assert "mine.txt" in refused.output
