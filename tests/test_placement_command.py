"""Displaced sensors against lead fields computed elsewhere, and the command that tells tolerances."""

import csv

import numpy as np
import pytest
from click.testing import CliRunner
from studies import BAND, SPHERE, TWO_REGIONS, brief_of, coils, cups, problem_of, study_of

from layout.anatomy.scalp_points import project
from layout.cli import cli
from layout.design.displaced import Displacements, Displacer, joined, none
from layout.design.objective import build_objective
from layout.design.placement import placement
from layout.engine.information import information
from layout.errors import BriefError
from layout.outputs.placement_tables import LEVELS
from layout.units import DEGREE, MM

QUICK = "[search]\nstarts = 3\nproof_parts = 10\nranked = 1\n"
CUPS = (SPHERE, TWO_REGIONS, cups(5, 'family = "10-20"'), BAND, QUICK)
COILS = (SPHERE, TWO_REGIONS, coils(3, "grid_mm = 40", 'axes = "two_axis"\nstandoff_mm = {standoff}\n'), BAND, QUICK)
WHOLE = np.array([0, 1, 2])
NEAR = ("S036 normal+tangent1", "S048 normal+tangent2", "S051 normal+tangent1")


def coils_at(standoff):
    return tuple(table.replace("{standoff}", f"{standoff:g}") for table in COILS)


def near_the_regions(tables):
    names = study_of(*tables).candidates.names
    return np.array([names.index(name) for name in NEAR])


def displacer_of(tables, chosen):
    study = study_of(*tables)
    return study, Displacer(study, build_objective(study, (problem_of(*tables),)), chosen)


def test_copies_that_stay_are_the_layout_itself():
    more = 'axes = "two_axis"\ngain_error_percent = 2\ncrosstalk_percent = 2\ncoil_mm = 8\n'
    both = (SPHERE, TWO_REGIONS, coils(2, "grid_mm = 40", more) + cups(2, 'family = "10-20"'), BAND)
    chosen = np.array([5, 30, 70, 75])
    _, displacer = displacer_of(both, chosen)
    goal = displacer.objective(none(np.array([0, 1, 2, 3, 1]))).goal
    expected = information(problem_of(*both).model, chosen)
    for some in ([0, 1, 2, 3], [0, 4, 2, 3]):
        assert goal.score(np.array(some)) == pytest.approx(expected, rel=1e-9)


def test_an_electrode_slid_onto_another_site_is_that_sites():
    study = study_of(*CUPS)
    names = list(study.candidates.names)
    chosen = np.array([names.index(name) for name in ("C3", "Fz", "P4")])
    _, displacer = displacer_of(CUPS, chosen)
    site = study.candidates.sites
    start, target = names.index("C3"), names.index("P3")
    radius = np.linalg.norm(site.positions[start] - study.head.sphere[0])
    # The point of the tangent plane that the sphere's centre projects onto the target.
    out = site.positions[target] - study.head.sphere[0]
    along = out * radius / (out @ site.normals[start]) - radius * site.normals[start]
    moved = none(np.arange(4) % 3)
    moved.along[3] = site.tangents[start] @ along
    arrived = project(study.head.scalp, site.positions[[start]] + along).positions[0]
    assert np.linalg.norm(arrived - site.positions[target]) < 0.5 * MM  # nearest on a scalp of flat faces
    ends = np.array([site.positions[start], arrived]) - study.head.sphere[0]
    angle = np.arccos(ends[0] @ ends[1] / np.prod(np.linalg.norm(ends, axis=1)))
    assert displacer.distances(moved)[3] == pytest.approx(radius * angle, rel=2e-3)
    score = displacer.objective(moved).goal.score(np.array([3, 1, 2]))
    swapped = information(problem_of(*CUPS).model, np.array([target, *chosen[1:]]))
    stayed = information(problem_of(*CUPS).model, chosen)
    assert abs(score - swapped) < 0.02 * abs(stayed - swapped)


def test_lifting_all_is_a_larger_standoff():
    chosen = near_the_regions(coils_at(6.5))
    _, displacer = displacer_of(coils_at(6.5), chosen)
    lifted = Displacements(WHOLE, np.zeros((3, 2)), np.zeros((3, 2)), np.full(3, 5 * MM))
    score = displacer.objective(lifted).goal.score(WHOLE)
    assert score == pytest.approx(information(problem_of(*coils_at(11.5)).model, chosen), rel=2e-3)
    assert score < 0.95 * information(problem_of(*coils_at(6.5)).model, chosen)


def test_a_tilt_turns_the_axes_about_the_point_on_the_scalp():
    chosen = near_the_regions(coils_at(6.5))
    study, displacer = displacer_of(coils_at(6.5), chosen)
    moved = none(WHOLE)
    moved.tilt[:, 0] = 30 * DEGREE
    channels = displacer.objective(moved).problems[0].scenario.channels
    site = study.candidates.site[chosen]
    up, across = study.candidates.sites.normals[site], study.candidates.sites.tangents[site, 1]
    # About tangent 1 the normal turns towards tangent 1 x normal.
    sign = np.sign(np.einsum("nd,nd->n", np.cross(study.candidates.sites.tangents[site, 0], up), across))
    leaning = np.cos(np.pi / 6) * up + (sign * np.sin(np.pi / 6))[:, None] * across
    np.testing.assert_allclose(channels.axes[::2], leaning, atol=2e-2)  # housings rest on a faceted scalp
    away = channels.positions[::2] - study.candidates.sites.positions[site]
    np.testing.assert_allclose(away / np.linalg.norm(away, axis=1)[:, None], leaning, atol=2e-2)


@pytest.mark.parametrize(
    ("tables", "goal"),
    [
        pytest.param(CUPS, "", id="electrodes"),
        pytest.param(coils_at(6.5), "", id="magnetometers", marks=pytest.mark.slow),
        pytest.param(CUPS, '[goal]\nkind = "localisation"\n', id="errors", marks=pytest.mark.slow),
    ],
)
def test_at_the_stated_tolerance_the_value_drops_as_stated(tables, goal):
    """The room of every sensor, evaluated anew by lead fields at exactly that distance: within 2 % of the drop."""
    tables = (*tables, goal)
    found = placement(brief_of(*tables), draws=4, most_failing=1)
    study = study_of(*tables)
    chosen = np.array([study.candidates.names.index(one.name) for one in found.sensors])
    _, displacer = displacer_of(tables, chosen)
    k, checked = len(chosen), 0
    for place, one in enumerate(found.sensors):
        for room, field in ((one.slide, "along"), (one.tilt, "tilt"), (one.lift, "lift")):
            if room is None:
                continue
            for level, size, toward in zip(LEVELS, room.worst, room.toward, strict=True):
                if not np.isfinite(size):
                    assert toward == ""
                    continue
                moved = none(np.append(np.arange(k), place))
                angle = float(toward) * DEGREE
                if field == "lift":
                    moved.lift[-1] = size
                elif field == "tilt":
                    moved.tilt[-1] = size * np.array([-np.sin(angle), np.cos(angle)])
                else:
                    radius = np.linalg.norm(study.candidates.sites.positions[0] - study.head.sphere[0])
                    step = radius * np.tan(size / radius)
                    moved.along[-1] = step * np.array([np.cos(angle), np.sin(angle)])
                goal = displacer.objective(moved).goal
                whole = goal.score(np.arange(k))
                there = goal.score(np.append(np.delete(np.arange(k), place), k))
                assert (whole - there) / abs(whole) == pytest.approx(level, rel=0.02), (one.name, field)
                checked += 1
    assert checked >= 3


def test_substitutes_and_losses_are_direct_values():
    found = placement(brief_of(*CUPS), draws=4, most_failing=2)
    study, model = study_of(*CUPS), problem_of(*CUPS).model
    chosen = np.array([study.candidates.names.index(one.name) for one in found.sensors])
    assert found.value == pytest.approx(information(model, chosen), rel=1e-9)
    for place, one in enumerate(found.sensors):
        without = np.delete(chosen, place)
        assert one.lost == pytest.approx(found.value - information(model, without), abs=1e-9)
        every = {
            name: information(model, np.append(without, number))
            for number, name in enumerate(study.candidates.names)
            if number not in chosen
        }
        expected = sorted(every, key=every.get, reverse=True)[:5]
        assert [name for name, _ in one.substitutes] == expected
        assert one.substitutes[0][1] <= found.value + 1e-9  # exchange left no better swap
        assert one.tilt is None
    assert [row.failing for row in found.losses if row.what == "failures"] == [1, 2]
    assert found.losses[0].loss.mean == pytest.approx(np.mean([one.lost for one in found.sensors]), rel=1e-9)
    assert found == placement(brief_of(*CUPS), draws=4, most_failing=2)


@pytest.mark.slow
def test_misplacement_grows_with_its_size_and_none_costs_nothing():
    still = placement(brief_of(*coils_at(6.5)), shift=1e-9, tilt=1e-9, draws=3, most_failing=1).losses[1:]
    for row in still:
        assert abs(row.loss.worst) < 1e-6
    rough = placement(brief_of(*coils_at(6.5)), shift=12 * MM, tilt=20 * DEGREE, draws=40, most_failing=1).losses[1:]
    slight = placement(brief_of(*coils_at(6.5)), shift=3 * MM, tilt=5 * DEGREE, draws=40, most_failing=1).losses[1:]
    for more, less in zip(rough, slight, strict=True):
        assert more.loss.mean > less.loss.mean
        assert more.loss.high - more.loss.low > less.loss.high - less.loss.low


def test_joined_parts_keep_their_order():
    both = joined([none(np.array([1])), none(np.array([0, 2]))])
    assert list(both.owner) == [1, 0, 2]
    assert len(both) == 3


def test_the_command_writes_a_folder_and_fits_a_terminal(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    monkeypatch.setenv("COLUMNS", "80")
    (tmp_path / "study.toml").write_text('schema = 1\ntitle = "A study"\n' + "\n".join(coils_at(6.5)))
    done = CliRunner().invoke(cli, ["placement", "study.toml", "--failing", "1", "--out", "there"])
    assert done.exit_code == 0, done.output
    assert max(len(line) for line in done.output.splitlines()) <= 80
    assert "cases" in done.output
    with (tmp_path / "there" / "placement.csv").open() as file:
        rows = list(csv.DictReader(file))
    assert len(rows) == 3
    assert all(row["lift_worst_mm_1_percent"] for row in rows)
    refused = CliRunner().invoke(cli, ["placement", "study.toml", "--rank", "0", "--out", "there"])
    assert refused.exit_code == 2
    assert "--rank" in refused.output


def test_a_given_layout_may_be_placed_and_a_rank_that_is_not_there_is_refused():
    found = placement(brief_of(*CUPS), layout="Fz,C3,C4", draws=2, most_failing=1)
    assert [one.name for one in found.sensors] == ["Fz", "C3", "C4"]
    with pytest.raises(BriefError, match="--rank: must be from 1"):
        placement(brief_of(*CUPS), rank=0)
