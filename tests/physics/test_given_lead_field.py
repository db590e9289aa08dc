"""A lead field from a file in the place of ours: the same rows when it is ours, one sentence when it does not fit."""

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from studies import BAND, CUPS, SPHERE, TWO_REGIONS, brief_of, cups, study_of

from layout.design.problem import build_problem
from layout.design.study import lay_out_study
from layout.errors import BriefError, FileError
from layout.physics.channels import candidate_channels
from layout.physics.given_lead_field import channel_names, given_channels, lead_field_arrays
from layout.physics.lead_field_files import write_lead_field

PAIR = (
    '[[stock]]\nkind = "gradiometer"\nname = "pair"\ncount = 2\nsites = { family = "10-20" }\nform = "planar"\n'
    'baseline_mm = 17\nhousing_mm = [28, 28, 30]\ncoil_noise_ft_per_rthz = 10\ngradients = "both_tangents"\n'
)
HERE = Path("given.npz")


@pytest.fixture
def study():
    return study_of(SPHERE, TWO_REGIONS, cups(4, 'family = "10-20"'), PAIR, BAND)


@pytest.fixture
def arrays(study):
    return lead_field_arrays(study.candidates, study.brief.stock, study.cortex)


def test_arrays_say_what_our_lead_field_is(study, arrays):
    channels = candidate_channels(study.candidates)
    some = np.array([5, 300])
    np.testing.assert_array_equal(arrays.gain[:, some], channels.lead_field(study.cortex, some, free=True).gain)
    assert len(set(arrays.channel_names)) == len(channels)
    assert set(arrays.channel_kinds) == {"electrode", "gradiometer"}
    names = channel_names(study.candidates)
    assert "Cz" in names
    assert "Cz gradients #2" in names
    np.testing.assert_array_equal(arrays.source_areas, study.head.cortex.areas)


def test_our_own_field_given_back_changes_nothing(study, arrays):
    """Also with rows in another order, more of them, and along the normals only."""
    order = np.random.default_rng(0).permutation(len(arrays.gain))
    mixed = replace(
        arrays,
        gain=np.concatenate([arrays.gain[order], arrays.gain[:1]]),
        channel_names=(*(arrays.channel_names[i] for i in order), "another"),
        channel_kinds=(*(arrays.channel_kinds[i] for i in order), "electrode"),
        channel_positions=np.concatenate([arrays.channel_positions[order], np.zeros((1, 3))]),
        channel_axes=np.concatenate([arrays.channel_axes[order], np.zeros((1, 3))]),
    )
    given = given_channels(study.candidates, study.cortex, mixed, HERE)
    some = np.array([5, 300, 7])
    computed = candidate_channels(study.candidates)
    for free in (True, False):
        expected = computed.lead_field(study.cortex, some, free).gain
        found = given.lead_field(study.cortex, some, free).gain
        np.testing.assert_allclose(found, expected, rtol=1e-9, atol=1e-12 * np.abs(expected).max())
    along = np.einsum("nmk,mk->nm", arrays.gain, study.head.cortex.normals)
    fixed = given_channels(study.candidates, study.cortex, replace(arrays, gain=along), HERE)
    np.testing.assert_array_equal(fixed.lead_field(study.cortex, some, False).gain, along[:, some])
    with pytest.raises(FileError, match=r"n_sources, 3\) where a region is free"):
        fixed.lead_field(study.cortex, some, True)
    np.testing.assert_array_equal(given.eye_gain(study.cortex), computed.eye_gain(study.cortex))
    assert given.displacements(study.cortex).sources_max == 0


def changed(arrays, name, row, value):
    array = getattr(arrays, name).copy()
    array[row] = value
    return replace(arrays, **{name: array})


def test_what_does_not_fit_is_refused(study, arrays):
    n = len(arrays.gain)
    turn = np.array([[1, 0, 0], [0, np.cos(0.02), -np.sin(0.02)], [0, np.sin(0.02), np.cos(0.02)]])
    cases = {
        "hold every channel": replace(arrays, channel_names=("other", *arrays.channel_names[1:])),
        "channel_kinds must be those": replace(arrays, channel_kinds=("magnetometer", *arrays.channel_kinds[1:])),
        "within 0.5 mm of the brief's": changed(arrays, "channel_positions", n - 1, np.full(3, 0.05)),
        "within 1° of the brief's": changed(arrays, "channel_axes", slice(None), arrays.channel_axes @ turn),
        "sources of the head's cortex": replace(arrays, source_positions=arrays.source_positions[1:]),
        "in their order": replace(arrays, source_positions=arrays.source_positions[::-1]),
        "where gain is along them": replace(
            changed(arrays, "source_normals", 3, -arrays.source_normals[3]), gain=arrays.gain[:, :, 0]
        ),
    }
    for words, wrong in cases.items():
        with pytest.raises(FileError, match=words) as caught:
            given_channels(study.candidates, study.cortex, wrong, HERE)
        assert str(caught.value).startswith("given.npz: ")
        assert "\n" not in str(caught.value)


def test_a_given_field_is_neither_moved_nor_differentiated(study, arrays):
    given = given_channels(study.candidates, study.cortex, arrays, HERE)
    with pytest.raises(FileError, match="where sensors are moved"):
        given.moved(given.positions, 0 * given.positions, given.normals)
    with pytest.raises(FileError, match="where localisation errors are wanted"):
        given.on_spheres(study.cortex.sphere, study.head)


def test_a_brief_names_the_file(tmp_path, study, arrays):
    """The engine's rows are the same from the file as computed; twice the gain in the file is twice the target."""
    path = tmp_path / "field.npz"
    tables = (SPHERE + f'lead_field_file = "{path}"\n', TWO_REGIONS, cups(4, 'family = "10-20"'), PAIR, BAND)
    ours = build_problem(study)
    for factor in (1.0, 2.0):
        write_lead_field(path, replace(arrays, gain=factor * arrays.gain))
        brief = brief_of(*tables)
        assert brief.head.lead_field_file == path
        found = build_problem(lay_out_study(brief))
        size = np.abs(ours.model.target).max()
        np.testing.assert_allclose(found.model.target, factor * ours.model.target, rtol=0, atol=1e-9 * size)
        assert found.calibration == ours.calibration


@pytest.mark.parametrize(
    ("tables", "key"),
    [
        ("[scenarios]\nconductivities_s_per_m = [[0.4, 0.01, 0.4]]\n", "scenarios.conductivities_s_per_m"),
        ("[scenarios]\npose_error_mm = 2\n", "scenarios.pose_error_mm"),
        ("[search]\npolish = true\n", "search.polish"),
    ],
)
def test_keys_that_need_our_own_field(tables, key):
    with pytest.raises(BriefError, match=r"where head\.lead_field_file gives the lead field") as refusal:
        brief_of(
            SPHERE + 'lead_field_file = "field.npz"\n',
            TWO_REGIONS,
            CUPS.format(count=4, sites='family = "10-20"'),
            tables,
            BAND,
        )
    assert key in str(refusal.value)
