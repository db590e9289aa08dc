"""From a brief to candidates: counts of candidates and channels, conflicts by brute force, and what is
refused.
"""

import numpy as np
import pytest
from synthetic_head import brief, electrodes, magnetometers

from layout.anatomy.positions import family_names
from layout.brief.objects import SitesBrief, ZoneBrief
from layout.errors import BriefError, FileError, InfeasibleError
from layout.sensing.lay_out import lay_candidates

GRID = SitesBrief(grid_pitch=0.025)


def test_electrodes_at_a_family(head, standard):
    laid = lay_candidates(head, brief(electrodes(sites=SitesBrief(family="10-10"), keep_out=())), standard)
    assert laid.names == laid.sites.names == family_names("10-10")
    assert laid.sites.nearest_name[5] == laid.names[5]
    scalp_names = [i for i, name in enumerate(laid.names) if name not in ("A1", "A2")]
    assert laid.sites.nearest_offset[scalp_names].max() < 3e-6
    assert np.array_equal(laid.candidate_of_channel, np.arange(74))
    assert np.array_equal(laid.positions, laid.sites.positions)
    assert laid.is_electrode.all()
    assert not laid.axes.any()
    assert np.array_equal(laid.housing_pose, np.tile(np.eye(4), (74, 1, 1)))
    assert laid.cliques == ()
    assert any("A1 and A2 are approximate" in note for note in laid.notes)


def test_standard_positions_are_computed_when_not_given(head, standard):
    one = brief(electrodes(keep_out=()))
    a, b = lay_candidates(head, one), lay_candidates(head, one, standard)
    assert np.array_equal(a.positions, b.positions)


def test_default_zones_keep_fp_and_drop_ears(head, standard):
    laid = lay_candidates(head, brief(electrodes()), standard)
    assert set(family_names("10-20")) - set(laid.names) == {"A1", "A2"}
    assert "cap: 19 of 21 sites allowed (taken by ears 2; a site may be counted twice)" in laid.notes
    assert not any("A1" in note for note in laid.notes)


@pytest.mark.parametrize(
    ("axes", "candidates", "channels"),
    [
        ("normal", 1, (1,)),
        ("tangents", 2, (1, 1)),
        ("any_of_three", 3, (1, 1, 1)),
        ("two_axis", 2, (2, 2)),
        ("three_axis", 1, (3,)),
    ],
)
def test_axes_options(head, standard, axes, candidates, channels):
    laid = lay_candidates(head, brief(magnetometers(axes=axes)), standard)
    n = len(laid.sites)
    assert len(laid) == n * candidates
    assert np.array_equal(np.bincount(laid.candidate_of_channel), np.tile(channels, n))
    assert (np.diff(laid.candidate_of_channel) >= 0).all()
    assert np.array_equal(laid.site, np.repeat(np.arange(n), candidates))
    assert len(set(laid.names)) == len(laid)
    assert laid.names[0].startswith(laid.sites.names[0] + " ")
    first = laid.axes[: sum(channels)]
    normal, front = laid.housing_pose[0, :3, 2], laid.housing_pose[0, :3, 1]
    side = np.cross(normal, front)
    wanted = {
        "normal": [normal],
        "tangents": [front, side],
        "any_of_three": [normal, front, side],
        "two_axis": [normal, front, normal, side],
        "three_axis": [normal, front, side],
    }[axes]
    assert np.allclose(first, wanted)
    own = {tuple(clique) for clique in laid.cliques}
    expected = {tuple(range(i, i + candidates)) for i in range(0, len(laid), candidates)} if candidates > 1 else set()
    assert own == expected


def test_sensitive_centre_is_standoff_above_the_face(head, standard):
    laid = lay_candidates(head, brief(magnetometers(standoff=7e-3, hair=2e-3)), standard)
    above = laid.positions - laid.housing_pose[:, :3, 3]
    assert np.allclose(above, 7e-3 * laid.axes)
    height = np.linalg.norm(laid.positions - laid.sites.positions, axis=1)
    assert height.min() > 8.9e-3
    assert height.max() < 9.6e-3


def pairs_in_cliques(laid):
    covered = np.zeros((len(laid), len(laid)), dtype=bool)
    for clique in laid.cliques:
        covered[np.ix_(clique, clique)] = True
    np.fill_diagonal(covered, False)
    return covered


def test_conflicts_are_exactly_the_near_pairs(head, standard):
    """Two kinds with different spacings on partly the same places: all pairs by brute force."""
    stock = (
        electrodes(sites=SitesBrief(family="10-10"), spacing=0.03),
        magnetometers(sites=SitesBrief(family="10-10"), axes="tangents", spacing=0.045),
        electrodes(name="spare", sites=SitesBrief(family="10-20")),
    )
    laid = lay_candidates(head, brief(*stock), standard)
    first_channel = np.searchsorted(laid.candidate_of_channel, np.arange(len(laid)))
    sensor = laid.positions[first_channel]
    on_scalp = laid.sites.positions[laid.site]
    spacing = np.array([0.03, 0.045, 0.0])[laid.kind]
    expected = np.zeros((len(laid), len(laid)), dtype=bool)
    for i in range(len(laid)):
        for j in range(len(laid)):
            near = np.linalg.norm(sensor[i] - sensor[j]) < max(spacing[i], spacing[j])
            same = np.linalg.norm(on_scalp[i] - on_scalp[j]) < 1e-3
            expected[i, j] = i != j and (near or same)
    assert expected.sum() > len(laid)
    assert np.array_equal(pairs_in_cliques(laid), expected)
    assert len(set(laid.names)) == len(laid)
    assert len(laid.sites) < len({(k, s) for k, s in zip(laid.kind, laid.site, strict=True)})  # sites are shared


def test_equal_names_at_different_places_stay_apart(head, standard):
    laid = lay_candidates(
        head,
        brief(magnetometers(name="a"), magnetometers(name="b", sites=SitesBrief(grid_pitch=0.03))),
        standard,
    )
    assert len(set(laid.sites.names)) == len(laid.sites)
    assert any(name.endswith("@b") for name in laid.sites.names)


def test_sites_tell_everything(head, standard):
    laid = lay_candidates(head, brief(magnetometers()), standard)
    sites = laid.sites
    n = len(sites)
    assert sites.landmark_distance.shape == (n, 4)
    assert sites.arc_fractions.shape == (n, 2)
    assert np.allclose(np.linalg.norm(sites.normals, axis=1), 1)
    assert np.allclose(np.einsum("nkd,nd->nk", sites.tangents, sites.normals), 0, atol=1e-12)
    assert (sites.travel_gap == 0).all()
    assert np.array_equal(sites.slot_axes, sites.normals)
    points = np.array([standard[name] for name in sites.nearest_name])
    assert np.allclose(np.linalg.norm(points - sites.positions, axis=1), sites.nearest_offset, atol=1e-9)
    labels = [name for name in standard if name not in ("A1", "A2")]
    every = np.array([standard[name] for name in labels])
    brute = np.linalg.norm(every[None] - sites.positions[:, None], axis=2).min(axis=1)
    assert np.allclose(brute, sites.nearest_offset, atol=1e-9)
    straight = np.linalg.norm(sites.positions - head.landmarks.nas, axis=1)
    assert (sites.landmark_distance[:, 0] >= straight - 1e-4).all()
    left = sites.positions[:, 0] < -1e-3
    assert (sites.arc_fractions[left, 1] < 0.5).all()


def test_listed_electrodes(head, standard, tmp_path):
    table = tmp_path / "electrodes.tsv"
    rows = [f"E{i}\t" + "\t".join(f"{v * 1.03e3:.4f}" for v in standard[n]) for i, n in enumerate(["Cz", "C3", "Pz"])]
    table.write_text("name\tx\ty\tz\n" + "\n".join(rows) + "\n")
    laid = lay_candidates(head, brief(electrodes(count=3, sites=SitesBrief(electrodes_tsv=table))), standard)
    assert laid.names == ("E0", "E1", "E2")
    assert laid.sites.nearest_name == ("Cz", "C3", "Pz")
    assert laid.sites.nearest_offset.max() < 1e-3
    assert any("moved onto the scalp" in note for note in laid.notes)
    table.write_text("name\tx\ty\tz\nE1\t0\t0\t90\nE2\t0\t0\t125\n")
    with pytest.raises(FileError, match=r"within 30 mm of the scalp.*'E2' is 35 mm off"):
        lay_candidates(head, brief(electrodes(sites=SitesBrief(electrodes_tsv=table))), standard)


def test_forbidden_sites_and_old_names(head, standard):
    laid = lay_candidates(head, brief(electrodes(reference="T4"), forbid=("Cz", "T5"), keep=("T3",)), standard)
    assert {"Cz", "P7"}.isdisjoint(laid.names)
    assert {"T7", "T8"} <= set(laid.names)


@pytest.mark.parametrize(
    ("stock", "places", "error", "said"),
    [
        (
            {"count": 20},
            {},
            InfeasibleError,
            r"stock\[0\].count: .*19 of 21 \(lost to ears 2\), but 20 was given",
        ),
        ({}, {"forbid": ("Cz1",)}, BriefError, "places.forbid: .*'Cz1'.*near names: .*Cz"),
        ({}, {"keep": ("XX",)}, BriefError, "places.keep: .*'XX'"),
        ({}, {"keep": ("Cz",), "forbid": ("Cz",)}, BriefError, "places.keep: .*forbid allow, but 'Cz'"),
        ({}, {"keep": ("A1",)}, BriefError, "places.keep: .*zones"),
        ({"reference": "M1"}, {}, BriefError, r"stock\[0\].reference: .*'M1'"),
        ({"reference": "A1"}, {}, BriefError, r"stock\[0\].reference: .*zones and forbid allow, but 'A1'"),
        ({"keep_out": ("nose",)}, {}, BriefError, r"stock\[0\].keep_out: zone must be one of .*'nose'"),
        (
            {"only_in": ("patch",)},
            {"zones": (ZoneBrief("patch", ("Cz",), 1e-3),)},
            InfeasibleError,
            "outside patch 20",
        ),
    ],
)
def test_what_cannot_be(head, standard, stock, places, error, said):
    with pytest.raises(error, match=said) as caught:
        lay_candidates(head, brief(electrodes(**stock), **places), standard)
    assert "\n" not in str(caught.value)


@pytest.mark.slow
def test_housings_that_would_meet_are_told(head, standard):
    tight = lay_candidates(head, brief(magnetometers(sites=SitesBrief(grid_pitch=0.012))), standard)
    told = [note for note in tight.notes if "housings would meet" in note]
    assert len(told) == 1
    needed = float(told[0].split("spacing_mm above ")[1].split()[0])
    spaced = magnetometers(sites=SitesBrief(grid_pitch=0.012), spacing=(needed + 0.01) * 1e-3)
    assert not any("would meet" in note for note in lay_candidates(head, brief(spaced), standard).notes)
    assert not any("would meet" in note for note in lay_candidates(head, brief(magnetometers()), standard).notes)
