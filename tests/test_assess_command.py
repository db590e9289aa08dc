"""Given layouts judged end to end on a sphere head, and the command that writes it."""

import csv
from dataclasses import replace

import numpy as np
import pytest
from click.testing import CliRunner
from studies import BAND, SPHERE, TWO_REGIONS, brief_of, coils, cups, problem_of, study_of

from layout.cli import cli
from layout.design import build_problem, design
from layout.design.assess import asked_models, assess
from layout.design.scenarios import scenarios
from layout.engine.information import information
from layout.engine.localisation import linearised_errors
from layout.errors import BriefError, FileError
from layout.outputs.assess_tables import assess_files
from layout.outputs.tables import sensors_csv

QUICK = "[search]\nstarts = 3\nproof_parts = 10\n"
FEW = (SPHERE, TWO_REGIONS, cups(6, 'family = "10-20"'), BAND, QUICK)
NAMES = "Fz,C3,C4,Pz"


def numbers_of(study, names):
    return np.array([study.candidates.names.index(name) for name in names.split(",")])


def test_values_are_the_engines_and_ceilings_are_above():
    study, problem = study_of(*FEW), problem_of(*FEW)
    found = assess(brief_of(*FEW), [NAMES, "F3,F4,T3,O2,Cz,P3"])
    for one, names in zip(found.layouts, (NAMES, "F3,F4,T7,O2,Cz,P3"), strict=True):
        chosen = numbers_of(study, names)
        assert one.value == pytest.approx(information(problem.model, chosen), rel=1e-9)
        for lost, place in zip(one.lost, range(len(chosen)), strict=True):
            without = information(problem.model, np.delete(chosen, place))
            assert lost == pytest.approx(one.value - without, abs=1e-9)
        for name, figure in one.per_region.items():
            assert figure.bits == pytest.approx(information(problem.one_region(name), chosen), rel=1e-9)
        assert one.value <= one.best <= one.bound + 1e-9
        assert all(one.best <= top.value for top in found.ceilings)
        assert one.keeps_rules
        assert one.notes == ()
    assert found.ceilings[-1].value == pytest.approx(information(problem.model, np.arange(19)), rel=1e-9)
    best = design(brief_of(SPHERE, TWO_REGIONS, cups(4, 'family = "10-20"'), BAND, QUICK)).layouts[0]
    assert found.layouts[0].best == pytest.approx(best.value, rel=1e-9)


def test_errors_in_mm_smaller_is_better():
    tables = (*FEW, '[goal]\nkind = "localisation"\n')
    found = assess(brief_of(*tables), [NAMES])
    (one,) = found.layouts
    problem = problem_of(*tables)
    errors = linearised_errors(problem.localisation, numbers_of(study_of(*tables), NAMES))
    assert one.value == pytest.approx(1e3 * np.sqrt(problem.localisation.share @ errors**2), rel=1e-9)
    assert one.value >= one.best >= one.bound >= found.ceilings[-1].value
    assert all(lost >= 0 for lost in one.lost)
    row = next(csv.DictReader(assess_files(found)["layouts.csv"].splitlines()))
    assert float(row["percent_of_bound"]) == pytest.approx(100 * one.bound / one.value, rel=1e-5)


def test_tables_of_earlier_runs_are_found_again(tmp_path):
    tables = (SPHERE, TWO_REGIONS, coils(3, "grid_mm = 40", 'axes = "any_of_three"\n'), BAND, QUICK)
    best = design(brief_of(*tables)).layouts[0]
    (tmp_path / "sensors.csv").write_text(sensors_csv(best, "bits"))
    (one,) = assess(brief_of(*tables), [str(tmp_path / "sensors.csv")]).layouts
    assert one.value == pytest.approx(best.value, rel=1e-9)
    assert one.notes == ()


@pytest.mark.slow
def test_free_axes_are_taken_from_the_table(tmp_path):
    tables = (SPHERE, TWO_REGIONS, coils(3, "grid_mm = 50", 'axes = "free"\n'), BAND, QUICK)
    best = design(brief_of(*tables)).layouts[0]
    (tmp_path / "sensors.csv").write_text(sensors_csv(best, "bits"))
    (one,) = assess(brief_of(*tables), [str(tmp_path / "sensors.csv")]).layouts
    assert one.value == pytest.approx(best.value, rel=1e-6)  # axes are written with six decimals


def test_positions_off_the_sites_are_moved_and_told_or_refused(tmp_path):
    study = study_of(*FEW)
    cz = study.candidates.sites.positions[study.candidates.sites.names.index("Cz")] * 1e3
    path = tmp_path / "electrodes.tsv"
    rows = [("A", cz[0] + 6, cz[1], cz[2]), ("B", *(study.standard["C3"] * 1e3)), ("C", *(study.standard["C4"] * 1e3))]
    path.write_text("name\tx\ty\tz\n" + "".join("\t".join(map(str, row)) + "\n" for row in rows))
    (one,) = assess(brief_of(*FEW), [str(path)]).layouts
    assert one.value == pytest.approx(information(problem_of(*FEW).model, numbers_of(study, "Cz,C3,C4")), rel=1e-9)
    assert one.notes == ("moved to the nearest candidate site: A to Cz (6.0 mm)",)
    with pytest.raises(FileError, match=r"within 5 mm .* 'A' is 6\.0 mm off"):
        assess(brief_of(*FEW), [str(path)], within=5e-3)
    with pytest.raises(BriefError, match=r"sites of their own.*share Cz"):
        assess(brief_of(*FEW), ["Cz,CCPz,Pz"], within=40e-3)
    with pytest.raises(BriefError, match=r"'Qz' was given"):
        assess(brief_of(*FEW), ["Cz,Qz"])
    with pytest.raises(FileError, match="no such file"):
        assess(brief_of(*FEW), ["absent.tsv"])


def test_a_layout_that_breaks_a_rule_is_judged_all_the_same():
    tables = (SPHERE, TWO_REGIONS, cups(4, 'family = "10-20"', "spacing_mm = 60\n"), BAND, QUICK)
    (one,) = assess(brief_of(*tables), ["Fz,Cz,C3,C4"]).layouts
    assert not one.keeps_rules
    assert one.bound >= one.best
    assert "breaks a rule" in one.notes[-1]


def test_other_models_are_direct_values_and_designs_are_best_there():
    brief = brief_of(*FEW, "[scenarios]\nconductivities_s_per_m = [[0.33, 0.02, 0.33]]\nnoise_factors = [3.0]\n")
    found = assess(brief, [NAMES, "F3,F4,Cz,O1"], other_models=True)
    study = study_of(*FEW)
    asked = scenarios(replace(study, brief=brief))
    assert [one.name for one in found.models] == [one.name for one in asked]
    calibration = problem_of(*FEW).calibration
    for model, scenario in zip(found.models, asked, strict=True):
        problem = build_problem(study, scenario=scenario, calibration=calibration)
        assert model.values[NAMES] == pytest.approx(information(problem.model, numbers_of(study, NAMES)), rel=1e-9)
        assert max(model.values.values()) <= model.bound + 1e-9
        assert model.values[f"designed for {model.name}"] == pytest.approx(model.designed, rel=1e-9)
        assert model.designed >= model.values[NAMES]
    assert found.models[0].order is None
    own = np.array(list(found.models[0].values.values()))
    other = np.array(list(found.models[2].values.values()))
    turned = {(i, j) for i in range(len(own)) for j in range(i) if (own[i] - own[j]) * (other[i] - other[j]) < -1e-18}
    assert (found.models[2].order.reversed > 0) == (len(turned) > 0)


def test_the_standard_set_of_models_changes_the_skull_and_on_the_template_the_head():
    sphere = asked_models(brief_of(*FEW))
    assert [round(one[1], 6) for one in sphere.conductivities] == [0.00825, 0.033]
    assert sphere.heads == ()
    four = brief_of('[head]\nkind = "template"\nlayers = 4\n', *FEW[1:])
    own = four.head.conductivities
    for one, factor in zip(asked_models(four).conductivities, (0.5, 2), strict=True):
        assert one == (own[0], own[1], factor * own[2], own[3])
    assert len(asked_models(four).heads) == 2


@pytest.mark.slow
def test_the_command_writes_a_folder_and_fits_a_terminal(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    monkeypatch.setenv("COLUMNS", "80")
    (tmp_path / "study.toml").write_text('schema = 1\ntitle = "A study"\n' + "\n".join(FEW))
    done = CliRunner().invoke(cli, ["assess", "study.toml", NAMES, "F3,F4,Cz,O1", "--other-models", "--out", "there"])
    assert done.exit_code == 0, done.output
    assert max(len(line) for line in done.output.splitlines()) <= 80
    names = {path.name for path in (tmp_path / "there").iterdir()}
    assert names == {"layouts.csv", "regions.csv", "channels.csv", "models.csv", "columns.json", "made-by.json"}
    again = {path.name: path.read_bytes() for path in (tmp_path / "there").iterdir()}
    CliRunner().invoke(cli, ["assess", "study.toml", NAMES, "F3,F4,Cz,O1", "--other-models", "--out", "there"])
    assert again == {path.name: path.read_bytes() for path in (tmp_path / "there").iterdir()}
    refused = CliRunner().invoke(cli, ["assess", "study.toml", "Qz", "--out", "there"])
    assert refused.exit_code == 2
