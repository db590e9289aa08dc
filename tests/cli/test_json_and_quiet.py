"""What --json and --quiet print, for every command that prints a result; the numbers beside those of the tables. And
what these commands say on their way, beside the stages that the time left is told from."""

import contextlib
import csv
import json
import re

import numpy as np
import pytest
from click.testing import CliRunner
from studies import BAND, SPHERE, TWO_REGIONS, coils, cups

from layout.cli import cli, shared
from layout.cli.stages import WRITE
from layout.outputs import check, writer
from layout.outputs.pictures.figure import Picture
from layout.outputs.ranking import ranking_json

QUICK = "[search]\nstarts = 2\nproof_parts = 0\nranked = 1\n"
BOTH = (SPHERE, TWO_REGIONS, cups(4, 'family = "10-20"') + coils(2, 'family = "10-20"'), BAND, QUICK)
NAMES = "Fz,C3,C4,Pz"
COMMANDS = {
    "design": ["design", "study.toml", "--quick"],
    "check": ["check", "study.toml"],
    "assess": ["assess", "cups.toml", NAMES, "F3,F4,Cz,O1"],
    "curve": ["curve", "cups.toml", "--counts", "3,4,6"],
    "placement": ["placement", "study.toml", "--failing", "1"],
    "simulate": ["simulate", "cups.toml", "--layout", NAMES, "--fits", "20", "--noise", "1"],
    "lead-field": ["lead-field", "study.toml"],
    "new": ["new", "cap"],
    "noise": ["noise", "cups.toml", "--recording", "rest.npz"],
    "many": ["many", "plan.toml", "--workers", "0"],
}
PLAN = 'schema = 1\ntitle = "two sizes"\nbrief = "cups.toml"\n[cross]\ncounts = [3, 4]\n'
MORE = ["completion"]  # prints no result


def strict(text):
    """JSON without the constants that JSON does not have."""

    def refuse(name):
        raise AssertionError(f"{name} is no JSON")

    return json.loads(text, parse_constant=refuse)


@pytest.fixture(scope="module")
def answers(tmp_path_factory):
    """A function that runs a command with more words once, and returns (its folder, the answer).

    Its `said`: command -> (its stages, what it said it was doing).
    """
    folder, done, said = tmp_path_factory.mktemp("runs"), {}, {}
    (folder / "study.toml").write_text('schema = 1\ntitle = "Σ both"\n' + "\n".join(BOTH))
    cups_only = (SPHERE, TWO_REGIONS, cups(4, 'family = "10-20"'), BAND, QUICK)
    (folder / "cups.toml").write_text('schema = 1\ntitle = "cups"\n' + "\n".join(cups_only))
    (folder / "plan.toml").write_text(PLAN)
    names = ("Fp1", "Fp2", "F3", "F4", "C3", "C4", "Cz", "P3", "P4", "O1", "O2")
    power = 4e-12 * (np.eye(len(names)) + np.ones((len(names), len(names))))
    np.savez(folder / "rest.npz", covariance=power, names=np.array(names), unit="V", seconds=60.0)

    def fill(folder, result, audit, progress):
        (folder / "ranking.json").write_text(ranking_json(result), encoding="utf-8")

    def answer(name, *more):
        @contextlib.contextmanager
        def recorded(stages, quiet):
            said[name] = (stages, [])
            yield said[name][1].append

        if (name, *more) not in done:
            with pytest.MonkeyPatch.context() as patch:
                patch.chdir(folder)
                patch.setattr(shared, "progress_shown", recorded)
                patch.setattr(writer, "_fill", fill)
                patch.setattr(check, "check_picture", lambda found: Picture(b"", b""))
                (folder / "cap.toml").unlink(missing_ok=True)
                done[name, *more] = CliRunner().invoke(cli, [*COMMANDS[name], *more])
        return folder / "results" / "runs", done[name, *more]

    answer.said = said
    return answer


def test_every_command_that_prints_a_result_has_both_options():
    with_options = {name for name, one in cli.commands.items() if "as_json" in {param.name for param in one.params}}
    assert with_options >= set(COMMANDS)
    assert set(cli.commands) - with_options <= set(MORE)


@pytest.mark.parametrize("name", COMMANDS)
def test_json_and_quiet_together_are_refused_in_one_sentence(name):
    said = CliRunner().invoke(cli, [*COMMANDS[name], "--json", "--quiet"])
    assert said.exit_code == 2
    assert said.stdout == ""
    assert said.stderr.splitlines()[-1] == "Error: --json and --quiet cannot be given together."


@pytest.mark.parametrize("name", COMMANDS)
def test_json_is_all_that_is_printed(answers, name):
    _, said = answers(name, "--json")
    assert said.exit_code == 0, said.output
    assert said.stderr == ""
    content = strict(said.stdout)
    assert type(content["schema"]) is int
    assert content["version"]


@pytest.mark.parametrize("name", ["check", "lead-field", "new"])
def test_quiet_says_nothing_and_errors_are_still_said(answers, name):
    _, said = answers(name, "--quiet")
    assert (said.exit_code, said.output) == (0, "")
    refused = CliRunner().invoke(cli, [COMMANDS[name][0], "absent", "-q"])
    assert refused.exit_code == 2
    assert refused.stdout == ""
    assert refused.stderr.startswith("Error: ")


def test_design_prints_what_ranking_json_holds(answers):
    runs, said = answers("design", "--json")
    assert said.stdout == (runs / "study" / "ranking.json").read_text(encoding="utf-8")


def test_simulate_prints_what_its_file_holds(answers):
    runs, said = answers("simulate", "--json")
    assert said.stdout == (runs / "cups-simulation" / "simulation.json").read_text(encoding="utf-8")


def table(path):
    with path.open(encoding="utf-8") as file:
        return list(csv.DictReader(file))


def same(value, cell):
    return cell == "" if value is None else value == pytest.approx(float(cell), rel=1e-5)


def test_curve_agrees_with_its_table(answers):
    runs, said = answers("curve", "--json")
    content = strict(said.stdout)
    rows = table(runs / "cups-curve" / "curve.csv")
    assert (content["unit"], content["by"], len(rows)) == ("bits", "count", 3)
    for point, row in zip(content["points"], rows, strict=True):
        assert point["names"] == row["names"].split(";")
        for key, column in (
            ("spent", "count"),
            ("sensors", "sensors"),
            ("channels", "channels"),
            ("value", "value_bits"),
            ("bound", "bound_bits"),
            ("gap_percent", "gap_percent"),
            ("percent_of_ceiling", "percent_of_ceiling"),
            ("even_spread", "even_spread_bits"),
            ("standard", "standard_bits"),
            ("cost", "cost"),
        ):
            assert same(point[key], row[column]), key
        assert (point["spent"] == content["knee"]) == (row["knee"] == "yes")


def test_assess_agrees_with_its_tables(answers):
    runs, said = answers("assess", "--json")
    content = strict(said.stdout)
    folder = runs / "cups-assess"
    rows = [row for row in table(folder / "layouts.csv") if row["row"] == "layout"]
    regions, channels = table(folder / "regions.csv"), table(folder / "channels.csv")
    assert [one["name"] for one in content["layouts"]] == [NAMES, "F3,F4,Cz,O1"]
    for one, row in zip(content["layouts"], rows, strict=True):
        for key, column in (
            ("value", "value_bits"),
            ("best_found", "best_found_bits"),
            ("bound", "bound_bits"),
            ("percent_of_best_found", "percent_of_best_found"),
            ("percent_of_bound", "percent_of_bound"),
            ("percent_of_ceiling", "percent_of_ceiling"),
        ):
            assert same(one[key], row[column]), key
        mine = {row["region"]: row["bits"] for row in regions if row["layout"] == one["name"]}
        assert mine.keys() == one["per_region"].keys()
        assert all(same(one["per_region"][name]["bits"], bits) for name, bits in mine.items())
        lost = {row["sensor"]: row["lost_without_bits"] for row in channels if row["layout"] == one["name"]}
        assert [sensor["name"] for sensor in one["sensors"]] == list(lost)
        assert all(same(sensor["lost_without"], lost[sensor["name"]]) for sensor in one["sensors"])
    assert content["models"] == []


def test_placement_agrees_with_its_tables(answers):
    runs, said = answers("placement", "--json")
    content = strict(said.stdout)
    folder = runs / "study-placement"
    levels = [f"{level:g}" for level in content["drops_percent"]]
    rows = table(folder / "placement.csv")
    assert {one["tilt"] is None for one in content["sensors"]} == {True, False}  # electrodes and magnetometers
    for one, row in zip(content["sensors"], rows, strict=True):
        assert (one["name"], one["site"]) == (row["name"], row["site"])
        assert same(one["lost_without"], row["lost_without_bits"])
        for way, unit in (("slide", "mm"), ("tilt", "deg"), ("lift", "mm")):
            for place, level in enumerate(levels):
                cell = row[f"{way}_worst_{unit}_{level}_percent"]
                if one[way] is None:
                    assert cell == ""
                elif one[way][f"worst_{unit}"][place] is None:
                    assert cell == f">{one[way][f'tried_{unit}']:.0f}"
                else:
                    assert one[way][f"worst_{unit}"][place] == pytest.approx(float(cell), abs=6e-4)
    for one, row in zip(content["losses"], table(folder / "expected_loss.csv"), strict=True):
        assert (one["what"], one["exact"]) == (row["what"], row["exact"] == "yes")
        assert same(one["mean"], row["mean_loss_bits"])
        assert one["shift_mm"] is None or same(one["shift_mm"], row["shift_mm"])


def test_check_says_what_the_brief_asks_for(answers):
    _, said = answers("check", "--json")
    content = strict(said.stdout)
    assert content["title"] == "Σ both"
    assert content["head"]["circumference_mm"] == pytest.approx(2 * 3.14159265 * 92, rel=2e-3)
    assert [(one["count"], len(one["sites"]), one["channels"]) for one in content["stock"]] == [
        (4, 19, 19),
        (2, 19, 19),
    ]
    depths = [one["least_depth_mm"] for one in content["regions"]]
    assert depths == pytest.approx([24, 24], abs=0.5)  # the sources' shell lies 92 - 80 + 12 mm under the scalp


def test_files_that_were_written_are_named(answers):
    runs, said = answers("lead-field", "--json")
    content = strict(said.stdout)
    assert content["file"].endswith("study-lead-field.npz")
    assert (runs / "study-lead-field.npz").is_file()
    assert content["channels"] == 38
    assert strict(answers("new", "--json")[1].stdout)["file"] == "cap.toml"


@pytest.mark.parametrize("name", [name for name in COMMANDS if name not in ("new", "many")])
def test_every_message_is_of_a_stage_and_every_stage_is_met(answers, name):
    # A plan has any number of cells of any size: nothing is known of the time before the first of them ends.
    answers(name, "--json")
    stages, messages = answers.said[name]
    met = set()
    for doing in messages:
        mine = [stage for stage in stages if re.match(stage.says, doing)]
        assert mine, doing
        met.update(stage.says for stage in mine)
        rest = doing.partition(": ")[2]
        for stage in mine:
            if stage.steps and rest:
                assert any(re.match(step.says, rest) for step in stage.steps), doing
    left_out = {r"proof: \d+ of"}  # these briefs ask for none
    left_out |= {stage.says for stage in WRITE}  # tests/outputs/test_writer.py
    assert {stage.says for stage in stages if stage.certain} - met <= left_out
