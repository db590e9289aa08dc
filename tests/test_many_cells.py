"""Cells of a plan in one process: their values, what a restart runs, errors of single cells, the command."""

import csv
import json
from dataclasses import replace
from itertools import combinations

import numpy as np
import pytest
from click.testing import CliRunner
from many_plan import BRIEF, PLAN, QUICK, plan_of, written
from scipy.stats import kendalltau
from studies import BAND, SPHERE, TWO_REGIONS, cups, problem_of, study_of

from layout.cli import cli
from layout.design.many import run as many
from layout.design.many.board import Board
from layout.design.many.cells import orders_of
from layout.design.many.run import ManyCells
from layout.design.many.work import failed, forget, work
from layout.design.problem import build_problem, calibrated, patches
from layout.engine.information import information
from layout.errors import LayoutError
from layout.outputs.many.folder import ManyFolder
from layout.outputs.many.result import CellResult, JudgedLayout
from layout.outputs.many.tables import many_files

SMALL = '[head]\nkind = "sphere"\nsource_mesh = "coarse"\nradii_mm = [70, 75, 80]\n'
REST = (cups(6, 'family = "10-20"'), BAND, QUICK)
SITES = ["Fz", "Cz", "Pz", "P3", "C3", "C4"]


@pytest.fixture(scope="module")
def found(tmp_path_factory):
    """All cells of the plan."""
    return ManyCells(plan_of(tmp_path_factory.mktemp("plan"))).run(workers=0)


def numbers(names):
    candidates = study_of(SPHERE, TWO_REGIONS, *REST).candidates
    return [candidates.names.index(name) for name in names]


def test_cells_are_in_the_order_of_the_plan(found):
    said = [(one.cell.head, one.cell.amount, one.cell.noise_factor) for one in found.cells]
    assert said == [(h, c, n) for h in ("small", "as stated") for c in (4, 6) for n in (1, 0.3)]
    assert not any(one.error for one in found.cells)


def test_values_are_those_of_a_brief_that_says_what_the_cell_says(found):
    """Noise amplitudes times f are moments over f; the smaller head laid out anew has the same sites by name."""
    louder = TWO_REGIONS.replace("moment_nam = 10\n", f"moment_nam = {10 / 0.3!r}\n")
    study = study_of(SPHERE, TWO_REGIONS, *REST)
    fixed = calibrated(study, patches(study))  # strengths hold on every head
    for cell in found.cells:
        regions = TWO_REGIONS if cell.cell.noise_factor == 1 else louder
        head = SPHERE if cell.cell.head == "as stated" else SMALL
        model = build_problem(study_of(head, regions, *REST), calibration=fixed).model
        for one in cell.layouts:
            assert one.value == pytest.approx(information(model, np.array(numbers(one.names))), rel=1e-6)
        assert cell.layouts[2].names == tuple(SITES)


def test_the_best_of_all_sets_lies_between_value_and_bound(found):
    model = problem_of(SPHERE, TWO_REGIONS, *REST).model
    best = max(information(model, np.array(one)) for one in combinations(range(19), 4))
    nominal = found.cells[4]
    assert nominal.designed == pytest.approx(best, rel=1e-9)
    assert best <= nominal.bound * (1 + 1e-12)
    for cell in found.cells:
        for one in cell.layouts:
            assert not one.within_rules or one.value <= cell.bound * (1 + 1e-12)
            assert one.within_rules == (len(one.names) == cell.cell.amount)


def test_the_layout_for_the_brief_is_that_of_its_own_cell(found):
    for cell in found.cells:
        nominal = found.cells[4 if cell.cell.amount == 4 else 6]
        assert cell.layouts[1].names == nominal.names
        assert cell.layouts[0].names == cell.names


@pytest.mark.slow
def test_no_cell_depends_on_those_before_it(found, tmp_path):
    """Cells share heads, lead fields and rows in a process; each alone gives the same to the last digit."""
    plan = plan_of(tmp_path)
    study = study_of(SPHERE, TWO_REGIONS, *REST)
    orders = orders_of(plan, {"six of ours": tuple(numbers(SITES))})
    for place in (0, 3, 5):
        order = replace(orders[place], calibration=calibrated(study, patches(study)))
        wanted = tuple(
            replace(one, chosen=found.cells[4 if order.cell.amount == 4 else 6].chosen)
            if one.designed_for == "brief"
            else one
            for one in order.wanted
        )
        forget()
        assert work(replace(order, wanted=wanted))[0] == found.cells[place]


def test_order_changes_are_kendalls(found):
    made = []
    rng = np.random.default_rng(5)
    for cell in found.cells:
        values = rng.uniform(1, 2, 5)
        layouts = tuple(
            replace(cell.layouts[0], name=f"L{place}", value=float(value)) for place, value in enumerate(values)
        )
        made.append(replace(cell, layouts=layouts))
    altered = replace(found, layouts=tuple(f"L{place}" for place in range(5)), cells=tuple(made))
    for place, cell in enumerate(made):
        first = made[0 if cell.cell.amount == 4 else 2]
        if cell is first:
            assert altered.order(cell) is None
            continue
        mine, its = ([one.value for one in which.layouts] for which in (cell, first))
        assert altered.order(cell).tau == pytest.approx(kendalltau(mine, its).statistic)
        assert altered.best(cell) == (f"L{int(np.argmax(mine))}",), place


def test_standings_count_best_cells_and_find_the_worst(found):
    for place, one in enumerate(found.standings()):
        shares = np.array([100 * cell.layouts[place].value / cell.designed for cell in found.cells])
        assert one.judged == 8
        assert one.median_share == pytest.approx(np.median(shares))
        assert one.worst_share == pytest.approx(shares.min())
        assert one.worst_cell == (None if place == 0 else int(shares.argmin()))
        top = [max(other.value for other in cell.layouts) for cell in found.cells]
        is_best = [cell.layouts[place].value >= best * (1 - 1e-9) for cell, best in zip(found.cells, top, strict=True)]
        assert one.best == sum(is_best)


def fast_work(order):
    """Some result at once, other in each cell."""
    value = order.cell.amount + order.cell.noise_factor
    layouts = tuple(JudgedLayout(one.name, value, 1, 1, 1.0, ("a",), True) for one in order.wanted)
    return CellResult(order.cell, "bits", value, value + 1, (0,), ("a",), layouts), 0.5


def run(folder, plan):
    """The keys of the cells that a run in this folder really worked on."""
    out, new = ManyFolder(folder / "out"), []

    def keep(result, key, seconds):
        out.keep(result, key, seconds)
        new.append(key)

    out.finish(ManyCells(plan).run(out.known, keep, workers=0))
    return new


ONE_HEAD = PLAN.replace('heads = ["small", "as stated"]\n', "")
ONE_HEAD = ONE_HEAD[: ONE_HEAD.index("[[heads]]")] + ONE_HEAD[ONE_HEAD.index("[[layouts]]") :]


def test_a_restart_runs_what_is_missing_and_nothing_of_another_brief_or_plan(tmp_path, monkeypatch):
    monkeypatch.setattr(many, "work", fast_work)
    fixed = calibrated(study := study_of(SPHERE, TWO_REGIONS, *REST), patches(study))
    monkeypatch.setattr(many, "lay_out_study", lambda brief, progress: study)
    monkeypatch.setattr(many, "calibrated", lambda *study: fixed)
    plan = plan_of(tmp_path, ONE_HEAD)
    assert len(run(tmp_path, plan)) == 4
    first = {name: (tmp_path / "out" / name).read_bytes() for name in ("many.csv", "cells.csv", "many.json")}
    assert run(tmp_path, plan) == []
    for name, content in first.items():
        assert (tmp_path / "out" / name).read_bytes() == content
    one, other, *_ = sorted((tmp_path / "out" / "cells").iterdir())
    one.write_text(one.read_text()[:200])
    other.unlink()
    assert len(run(tmp_path, plan)) == 2
    more = plan_of(tmp_path, ONE_HEAD.replace("noise_factors = [1, 0.3]", "noise_factors = [1, 0.3, 3]"))
    assert len(run(tmp_path, more)) == 2  # the plan grew by one noise level of two counts
    other_sites = ONE_HEAD.replace('"C4"]', '"F4"]')
    assert len(run(tmp_path, plan_of(tmp_path, other_sites))) == 4
    other_brief = plan_of(tmp_path, other_sites, BRIEF.replace("starts = 2", "starts = 3"))
    assert len(run(tmp_path, other_brief)) == 4
    assert len(list((tmp_path / "out" / "cells").iterdir())) == 4


def test_an_error_in_one_cell_is_its_own(tmp_path):
    plan = plan_of(tmp_path, ONE_HEAD.replace("counts = [4, 6]", "counts = [40, 4]"))
    found = ManyCells(plan).run(workers=0)
    why = "cross.counts: must be numbers of sensors that the brief's other rules allow, but 40 was given"
    assert [one.error for one in found.cells] == [why, why, "", ""]
    rows = list(csv.DictReader(many_files(found)["many.csv"].splitlines()))
    assert [row["error"] == "" for row in rows] == [False] * 6 + [True] * 6
    assert [row["value_bits"] == "" for row in rows] == [True] * 6 + [False] * 6
    assert json.loads(many_files(found)["many.json"])["cells"][0]["error"] == why


def test_a_layout_for_the_brief_that_is_not_there_leaves_the_others(tmp_path):
    given = {"six of ours": tuple(numbers(SITES))}
    orders = orders_of(plan_of(tmp_path), given)
    kept = []
    board = Board(orders, lambda key: None, lambda *one: kept.append(one), lambda doing: None)
    first = board.take(None)
    assert (first.cell.head, first.cell.amount) == ("as stated", 4)  # others wait for it
    board.done(first, failed(first, "every worker died", again=True), 0.0)
    freed = list(iter(lambda: board.take(None), None))
    assert len(freed) == 4  # the three behind it and the first of the other count, for which three wait
    assert board.is_empty
    waited = [one for one in freed if one.cell.amount == 4 and one.cell.head == "small"]
    assert [one.wanted[1].error for one in waited] == ["no layout was found for the brief (every worker died)"] * 2
    study = study_of(SPHERE, TWO_REGIONS, *REST)
    result, _ = work(replace(waited[0], calibration=calibrated(study, patches(study))))
    assert [bool(one.error) for one in result.layouts] == [False, True, False]
    board.done(waited[0], result, 0.0)
    assert not kept  # a restart tries both again


@pytest.mark.slow
def test_money_and_millimetres(tmp_path):
    brief = BRIEF.replace("contact_noise_uv = 1\n", "contact_noise_uv = 1\nprice = 10\n")
    brief += '[budget]\ntotal = 60\n[goal]\nkind = "localisation"\n'
    cross = "[cross]\nbudgets = [30, 60]\nsensor_noise_factors = [2]\nskull_conductivity_factors = [0.5]\n"
    plan = plan_of(tmp_path, f'schema = 1\ntitle = "Money"\nbrief = "study.toml"\n{cross}', brief)
    found = ManyCells(plan).run(workers=0)
    small, large = found.cells
    assert (found.unit, found.by) == ("mm", "budget")
    assert [one.layouts[0].cost for one in found.cells] == [30, 60]
    assert small.bound <= small.designed
    assert large.designed < small.designed
    assert large.cell.conductivities[1] == pytest.approx(0.0165 / 2, rel=1e-12)
    assert found.share(large, large.layouts[1]) <= 100 + 1e-9
    assert found.best(large)[0] == "designed for the cell"


@pytest.mark.parametrize("sites", ['["Fz", "Cz", "Nowhere"]', '["Fz", "Cz", "FCz"]'])
def test_given_layouts_are_checked_before_anything_is_run(tmp_path, sites):
    plan = plan_of(tmp_path, ONE_HEAD.replace(json.dumps(SITES), sites))
    with pytest.raises(LayoutError, match=r'^layouts "six of ours": (must|sensors must)'):
        ManyCells(plan)


def test_the_command_writes_a_folder_and_fits_a_terminal(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    monkeypatch.setenv("COLUMNS", "80")
    written(tmp_path, ONE_HEAD.replace("counts = [4, 6]", "counts = [4, 40]"))
    asked = ["many", "plan.toml", "--workers", "0", "--out", "there"]
    done = CliRunner().invoke(cli, asked)
    assert done.exit_code == 0, done.output
    assert max(len(line) for line in done.output.splitlines()) <= 80
    assert "2 of 4 cells have no result" in done.output
    with (tmp_path / "there" / "many.csv").open() as file:
        rows = list(csv.DictReader(file))
    columns = json.loads((tmp_path / "there" / "columns.json").read_text())
    assert list(columns["many.csv"]) == list(rows[0])
    assert len(rows) == 12
    again = CliRunner().invoke(cli, [*asked, "--json"])
    assert again.output == (tmp_path / "there" / "many.json").read_text()
    (tmp_path / "there" / "mine.txt").write_text("mine")
    refused = CliRunner().invoke(cli, asked)
    assert refused.exit_code == 2
    assert "mine.txt" in refused.output
    assert CliRunner().invoke(cli, [*asked, "--scheduler", "tcp://x:1"]).exit_code == 2


def test_tables_have_no_trace_of_times(found):
    slower = replace(found, seconds=tuple(9.0 for _ in found.cells))
    one, other = many_files(found), many_files(slower)
    assert {name for name in one if one[name] != other[name]} == {"times.csv"}
