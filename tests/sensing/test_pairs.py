"""Left-right pairs: every pair is its own mirror image, and nothing else is lost or joined."""

import numpy as np
import pytest
from synthetic_head import brief, electrodes, magnetometers

from layout.brief.objects import FootprintBrief, SitesBrief, ZoneBrief
from layout.errors import BriefError, InfeasibleError
from layout.noise.sensor import sensor_noise
from layout.physics.channels import candidate_channels
from layout.sensing.kept import kept_candidates, named_reference
from layout.sensing.lay_out import lay_candidates
from layout.sensing.rules import placement_rules

MIRROR = np.array([-1.0, 1.0, 1.0])
GRID = SitesBrief(grid_pitch=0.025)


def pairs_of(head, standard, *stock, **places):
    return lay_candidates(head, brief(*stock, left_right_pairs=True, **places), standard)


def by_name(laid):
    return {name: number for number, name in enumerate(laid.names)}


def test_named_positions_pair_left_with_right(head, standard):
    """The convention of the names itself: odd numbers left, even right, z on the midline."""
    laid = pairs_of(head, standard, electrodes(sites=SitesBrief(family="10-10")))
    single = {name for name, n in zip(laid.names, laid.sensors, strict=True) if n == 1}
    assert single == {name for name in laid.singles.names if name.endswith("z")}
    for name, n in zip(laid.names, laid.sensors, strict=True):
        if n == 2:
            left, right = name.split("+")
            assert int(left.strip("AFCTPOINp")) + 1 == int(right.strip("AFCTPOINp"))
            assert left.strip("0123456789") == right.strip("0123456789")
    assert laid.sensors.sum() == len(laid.singles)
    assert not any("mirror image" in note for note in laid.notes)


@pytest.mark.parametrize("axes", ["normal", "any_of_three", "two_axis", ((1.0, 0, 0), (0.6, 0, 0.8), (0.6, 0, -0.8))])
def test_positions_and_axes_are_mirror_images(head, standard, axes):
    laid = pairs_of(head, standard, magnetometers(sites=GRID, axes=axes))
    singles = laid.singles
    for one, members in enumerate(laid.pairs.members):
        rows = [np.flatnonzero(singles.candidate_of_channel == member) for member in members if member >= 0]
        mine = np.flatnonzero(laid.candidate_of_channel == one)
        assert np.array_equal(laid.positions[mine], singles.positions[np.concatenate(rows)])
        assert np.array_equal(laid.axes[mine], singles.axes[np.concatenate(rows)])
        first, last = rows[0], rows[-1]
        assert np.allclose(singles.positions[first] * MIRROR, singles.positions[last], rtol=0, atol=2e-3)
        likeness = np.einsum("nd,nd->n", singles.axes[first] * MIRROR, singles.axes[last])
        assert np.allclose(np.abs(likeness), 1, rtol=0, atol=2e-3)
        assert (laid.sensors[one] == 1) == (abs(singles.positions[first[0], 0]) < 5e-3)
    assert (laid.sensors == 2).sum() > 10
    assert (laid.sensors == 1).any()


def test_midline_axes_must_be_their_own_mirror_image(head, standard):
    axes = ((1.0, 0.0, 0.0), (0.6, 0.0, 0.8), (0.6, 0.0, -0.8), (0.0, 0.0, 1.0))
    laid = pairs_of(head, standard, magnetometers(sites=GRID, axes=axes))
    on_midline = {laid.axis_name[one] for one in np.flatnonzero(laid.sensors == 1)}
    assert on_midline == {"axis1", "axis4"}
    assert {"axis2", "axis3"} <= set(laid.axis_name)


def test_sites_without_a_mirror_image_are_left_out_and_told(head, standard):
    laid = pairs_of(head, standard, electrodes(), forbid=("C4", "Fz"))
    assert "C3" not in laid.names
    assert not any("C3" in name for name in laid.names)
    assert any("cap: 1 sites without a mirror image within 5 mm" in note and "(C3)" in note for note in laid.notes)


def test_a_grid_that_is_not_symmetrical(head, standard, tmp_path):
    """Only mutual neighbours within 5 mm are partners: of two on one side the nearer one counts."""
    table = tmp_path / "holes.tsv"
    rows = {
        "a": (-40, 0, 80),
        "b": (37, 0, 80),
        "c": (43, 4, 79),
        "d": (-40, 40, 70),
        "e": (33, 42, 70),
        "m": (2, 0, 90),
    }
    table.write_text("name\tx\ty\tz\n" + "".join(f"{n}\t{x}\t{y}\t{z}\n" for n, (x, y, z) in rows.items()))
    laid = pairs_of(head, standard, electrodes(count=2, sites=SitesBrief(electrodes_tsv=table)))
    assert set(laid.names) == {"a+b", "m"}


def test_exclusions_are_those_of_the_single_sensors(head, standard):
    footprint = FootprintBrief("circle", 30e-3, 30e-3)
    stock = (
        electrodes(sites=SitesBrief(family="10-10"), spacing=0.05, footprint=footprint),
        magnetometers(sites=GRID, axes="tangents", spacing=0.045),
    )
    laid = pairs_of(head, standard, *stock)
    excluded = [np.zeros((len(one), len(one)), dtype=bool) for one in (laid, laid.singles)]
    for table, one in zip(excluded, (laid, laid.singles), strict=True):
        for clique in one.cliques:
            table[np.ix_(clique, clique)] = True
        np.fill_diagonal(table, False)
    members = [[m for m in pair if m >= 0] for pair in laid.pairs.members]
    expected = np.array(
        [[i != j and excluded[1][np.ix_(a, b)].any() for j, b in enumerate(members)] for i, a in enumerate(members)]
    )
    assert np.array_equal(excluded[0], expected)
    assert not any(excluded[1][tuple(pair)] for pair in members if len(pair) == 2)
    alone = np.setdiff1d(np.flatnonzero(laid.singles.kind == 0), laid.pairs.members)
    assert len(alone) > 2  # partners nearer to each other than 50 mm
    assert (np.abs(laid.singles.positions[laid.singles.candidate_of_channel == alone[0], 0]) < 25e-3).all()


def test_keeping_one_side_keeps_the_pair(head, standard):
    one = brief(electrodes(reference="C4"), left_right_pairs=True, keep=("F3",))
    laid = lay_candidates(head, one, standard)
    kept = {laid.names[number] for number in kept_candidates(one, laid)}
    assert kept == {"F3+F4", "C3+C4"}
    assert laid.names[named_reference(one, laid)] == "C3+C4"
    assert laid.singles.names[named_reference(one, laid.singles)] == "C4"
    chosen = laid.single_sensors(kept_candidates(one, laid))
    assert {laid.singles.names[number] for number in chosen} == {"F3", "F4", "C3", "C4"}


def test_both_sensors_of_a_pair_count(head, standard):
    one = brief(electrodes(count=3), left_right_pairs=True, keep=("F3", "C3"))
    with pytest.raises(BriefError, match=r"places\.keep: must keep at most 3 sites of stock\[0\].* 4 were given"):
        kept_candidates(one, lay_candidates(head, one, standard))


def test_kept_without_a_mirror_image(head, standard):
    one = brief(electrodes(), left_right_pairs=True, keep=("C3",), forbid=("C4",))
    with pytest.raises(BriefError, match=r"places\.keep 'C3': must have a mirror image .* but 'C3' has none"):
        kept_candidates(one, lay_candidates(head, one, standard))


def test_an_odd_count_without_midline_sites(head, standard):
    sides = (ZoneBrief("sides", ("C3", "C4"), 30e-3),)
    one = brief(
        electrodes(count=3, only_in=("sides",), sites=SitesBrief(family="10-10")), left_right_pairs=True, zones=sides
    )
    laid = lay_candidates(head, one, standard)
    with pytest.raises(InfeasibleError, match=r"stock\[0\]\.count: must be even .* but 3 was given"):
        placement_rules(head, one, laid, standard)


def test_too_few_pairs(head, standard):
    left = (ZoneBrief("left", ("C3",), 60e-3),)
    one = brief(
        electrodes(count=4, only_in=("left",), sites=SitesBrief(family="10-10")), left_right_pairs=True, zones=left
    )
    with pytest.raises(InfeasibleError, match=r"places\.left_right_pairs: must leave at least .*stock\[0\].*4, but"):
        lay_candidates(head, one, standard)


def test_noise_and_normals_of_both_sides(head, standard):
    """A zone of noisy skin on one side only: each sensor of a pair has the noise and the normal of its own site."""
    cap = electrodes(contact_noise_in={"left": 5e-6})
    one = brief(cap, left_right_pairs=True, zones=(ZoneBrief("left", ("C3",), 20e-3),))
    laid = lay_candidates(head, one, standard)
    pair = np.flatnonzero(laid.candidate_of_channel == by_name(laid)["C3+C4"])
    assert sensor_noise(head, one, laid, standard)[pair].tolist() == [5e-6, 1e-6]
    normals = candidate_channels(laid).normals[pair]
    assert np.allclose(normals[0] * MIRROR, normals[1], rtol=0, atol=1e-6)
    assert abs(normals[0, 0]) > 0.1


def test_zone_rules_count_the_sides_of_pairs(head, standard):
    zone = ZoneBrief("left", ("C3",), 25e-3, at_most=2)
    one = brief(electrodes(sites=SitesBrief(family="10-10")), left_right_pairs=True, zones=(zone,))
    laid = lay_candidates(head, one, standard)
    (rule,) = placement_rules(head, one, laid, standard).rules
    assert (rule.weights == 1).all()
    assert by_name(laid)["C3+C4"] in rule.members
    both = ZoneBrief("both", ("C3", "C4"), 25e-3, at_most=2)
    one = brief(electrodes(sites=SitesBrief(family="10-10")), left_right_pairs=True, zones=(both,))
    (rule,) = placement_rules(head, one, laid, standard).rules
    assert (rule.weights == 2).all()
