"""layout simulate as a user meets it."""

import csv
import io
import json

import pytest
from click.testing import CliRunner
from small_brief import MAGNETOMETERS, SMALL_BRIEF

from layout.cli import cli
from layout.outputs.simulation_tables import FILES

ELECTRODES = SMALL_BRIEF.replace(MAGNETOMETERS, "").replace("count = 4", "count = 8")


def run(folder, *words, brief=ELECTRODES):
    (folder / "study.toml").write_text(brief)
    words = ["simulate", folder / "study.toml", "--out", folder / "out", "--fits", 40, "--noise", "1,0.05", *words]
    return CliRunner().invoke(cli, [str(word) for word in words])


def test_tables_files_and_json_agree(tmp_path):
    answer = run(tmp_path)
    assert answer.exit_code == 0, answer.output
    assert {one.name for one in (tmp_path / "out").iterdir()} == {*FILES, "made-by.json"}
    for heading in ("Localisation error", "By region and depth", "Minimum-norm map", "the bound", "even spread"):
        assert heading in answer.output
    assert max(len(line) for line in answer.output.splitlines() if "Written to" not in line) <= 80
    assert "nan" not in answer.output.lower().split()
    columns = json.loads((tmp_path / "out" / "columns.json").read_text())
    content = json.loads((tmp_path / "out" / "simulation.json").read_text())
    for file, words in columns.items():
        rows = list(csv.DictReader(io.StringIO((tmp_path / "out" / file).read_text())))
        assert list(rows[0]) == list(words)
        assert len(rows) == len(content["errors" if file == "simulation.csv" else "point_spread"])
    first = content["errors"][0]
    row = next(csv.DictReader(io.StringIO((tmp_path / "out" / "simulation.csv").read_text())))
    assert float(row["rms_mm"]) == pytest.approx(1e3 * first["figures"]["rms"], rel=1e-5)
    before = {one.name: one.read_bytes() for one in (tmp_path / "out").iterdir()}
    again = run(tmp_path, "--json")  # its own earlier output is replaced, by the same bytes
    assert again.exit_code == 0, again.output
    assert {one.name: one.read_bytes() for one in (tmp_path / "out").iterdir()} == before
    assert json.loads(again.output) == content


@pytest.mark.slow
def test_both_kinds_of_sensors_and_a_layout_by_names_or_by_table(tmp_path):
    names = run(tmp_path, "--layout", "Fz, C3, C4, Pz, T3, O2", "--json")
    assert names.exit_code == 0, names.output
    (given, *_) = json.loads(names.output)["layouts"]
    assert given["name"] == "given layout"
    assert [name.split()[0] for name in given["sensors"]] == ["Fz", "C3", "C4", "Pz", "T7", "O2"]
    table = tmp_path / "electrodes.tsv"
    table.write_text("name\tx\ty\tz\nA\t0\t0\t92\nB\t92\t0\t0\nC\t-92\t0\t0\n")
    by_table = run(tmp_path, "--layout", table, "--json")
    assert by_table.exit_code == 0 or "within 5 mm of a site" in by_table.output
    both = run(tmp_path, "--volume", "--priors", brief=SMALL_BRIEF)
    assert both.exit_code == 0, both.output


HOSTILE = {
    ("--fits", 3): "fits must be a whole number from 10",
    ("--noise", "1,loud"): "noise must be numbers parted by commas",
    ("--noise", "0"): "noise must be factors from 1e-6 to 1000",
    ("--noise", "nan"): "noise must be factors from 1e-6 to 1000",
    ("--layout", "9"): "layout must be a rank from 1 to search.ranked (2)",
    ("--layout", "Nowhere"): "layout: must name a site of the stock, but 'Nowhere'",
    ("--layout", ","): "layout must be a rank, a .csv or .tsv table, or names",
    ("--layout", "missing.tsv"): "missing.tsv",
    ("--layout", "Cz"): "layout must hold more than one electrode",
}


@pytest.mark.parametrize("words", HOSTILE)
def test_hostile_words_get_one_sentence(tmp_path, words):
    answer = run(tmp_path, *words)
    assert answer.exit_code == 2
    assert HOSTILE[words] in answer.output
    assert len([line for line in answer.output.splitlines() if line.strip()]) == 1
    assert "Traceback" not in answer.output
    assert not (tmp_path / "out").exists()


def test_a_folder_of_something_else_is_refused_before_the_work(tmp_path):
    (tmp_path / "out").mkdir()
    (tmp_path / "out" / "thesis.txt").write_text("mine")
    answer = run(tmp_path)
    assert answer.exit_code == 2
    assert "holds something else" in answer.output
    assert (tmp_path / "out" / "thesis.txt").read_text() == "mine"
