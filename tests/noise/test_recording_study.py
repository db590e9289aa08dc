"""A brief that names a recording gets its strengths, at all candidate sites."""

from dataclasses import replace

import numpy as np
import pytest
from recorded import NAMES, SMALL_STUDY, covariance_of, noise_parts, sample_covariance, white_recording, write_signals
from studies import BAND, SPHERE, TWO_REGIONS, coils, cups, study_of

from layout.brief.objects import RecordingBrief
from layout.design import build_problem
from layout.design.problem import calibrated, patches
from layout.errors import BriefError, FileError
from layout.noise.background import background_columns
from layout.noise.recording import as_recorded
from layout.physics.channels import Channels, electrodes_at, joined
from layout.units import FT, UV

PLANTED = {"contacts": 1.5, "background": 1.2, "eyes": 0.5}
BOTH_KINDS = (SPHERE, TWO_REGIONS, cups(4, 'family = "10-20"'), coils(3, "grid_mm = 40"), BAND)


def with_file(study, path, **keys):
    """The study of the same brief naming a recording."""
    noise = replace(study.brief.noise, recording=RecordingBrief(path, **keys))
    return replace(study, brief=replace(study.brief, noise=noise))


def save(path, covariance, names=NAMES, unit="V", seconds=120.0, **arrays):
    np.savez(path, covariance=covariance, names=np.array(names), unit=np.array(unit), seconds=seconds, **arrays)
    return path


@pytest.fixture(scope="module")
def exact(tmp_path_factory):
    """A file of the exact covariance of the planted strengths at the 19 sites, against T7."""
    covariance = covariance_of(**PLANTED)
    change = np.eye(len(NAMES)) - np.outer(np.ones(len(NAMES)), np.eye(len(NAMES))[NAMES.index("T7")])
    return save(tmp_path_factory.mktemp("recorded") / "rest.npz", change @ covariance @ change.T)


def test_planted_strengths_come_back(exact):
    study = with_file(study_of(*SMALL_STUDY), exact, reference="T7")
    found = build_problem(study).calibration
    assumed = noise_parts()[1]
    assert found.density == pytest.approx(1.2 * assumed.density, rel=1e-6, abs=0)
    assert found.eye == pytest.approx(0.5 * assumed.eye, rel=1e-6, abs=0)
    for name in ("eeg", "eeg_here", "magnetic_off", "magnetic_on"):
        assert getattr(found, name) == pytest.approx(1.2 * getattr(assumed, name), rel=1e-6, abs=0)
    assert as_recorded(study.brief, found).stock[0].contact_noise == pytest.approx(1.5 * UV, rel=1e-6, abs=0)


def test_all_candidates_get_the_fitted_noise(exact):
    """The rows of the problem are those of a brief which states the planted strengths, coils among them."""
    study = study_of(*BOTH_KINDS)
    found = build_problem(with_file(study, exact, reference="T7"))
    brief = study.brief
    noise = replace(brief.noise, eeg_rms=1.2 * brief.noise.eeg_rms, eyes_rms=0.5 * brief.noise.eyes_rms)
    stock = (replace(brief.stock[0], contact_noise=1.5 * UV), brief.stock[1])
    stated = build_problem(replace(study, brief=replace(brief, noise=noise, stock=stock)))
    np.testing.assert_allclose(found.sensor_sd, stated.sensor_sd, rtol=1e-6)
    np.testing.assert_allclose(found.model.nuisance, stated.model.nuisance, rtol=1e-5, atol=1e-9)
    np.testing.assert_allclose(found.model.target, stated.model.target, rtol=1e-5, atol=1e-9)


def test_a_brief_without_a_recording_is_as_before():
    study = study_of(*BOTH_KINDS)
    found = build_problem(study).calibration
    assert found.recorded is None
    assert as_recorded(study.brief, found) is study.brief
    assert not any("fitted" in figure.remark for figure in found.figures(39.0).values())


def test_notes_and_figures_say_what_was_fitted_and_what_not(exact):
    study = with_file(study_of(*BOTH_KINDS), exact, reference="T7")
    found = calibrated(study, patches(study))
    notes = " ".join(found.recorded.notes)
    assert "fitted to rest.npz: 19 electrodes, 120 s in 1-40 Hz, worth 9360 independent samples" in notes
    assert "contact noise, rms of cup 1.5 µV (1.4" in notes
    assert "says nothing of magnetometers' own noise or of fields from outside, which stay as assumed" in notes
    assert "Own noise as assumed, not recorded: coil." in notes
    assert "differ from the fit by 0 % rms; deviance 0 on 168 degrees of freedom: no sign of a wrong model" in notes
    figures = found.figures(39.0)
    eeg = figures["background EEG, rms at 10-20 sites"]
    assert eeg.value == pytest.approx(1.2 * study.brief.noise.eeg_rms / UV, rel=1e-6)
    assert eeg.remark.startswith("fitted to rest.npz, 95 % ")
    low, high = (float(word) for word in eeg.remark.split("95 % ")[1].split(" to "))
    assert low < eeg.value < high
    assert figures["contact noise, rms"].value == pytest.approx(1.5, rel=1e-6)
    assert "variances of the recording against the fit, rms difference" in figures


def test_a_recording_of_few_electrodes_leaves_the_eyes_as_assumed(tmp_path):
    """Three electrodes at the back of the head, half a second long."""
    names = ("Pz", "O1", "O2", "P7")
    rows = [NAMES.index(name) for name in names]
    rng = np.random.default_rng(1)
    covariance = sample_covariance(covariance_of(**PLANTED), 40, rng)[np.ix_(rows, rows)]
    study = with_file(study_of(*SMALL_STUDY), save(tmp_path / "back.npz", covariance, names, seconds=0.5))
    found = calibrated(study, patches(study))
    assert found.recorded.fit.strengths["eyes"].status == "assumed"
    assert found.eye == pytest.approx(noise_parts()[1].eye, rel=1e-12, abs=0)
    assert "eye dipole, rms of each component" in next(n for n in found.recorded.notes if n.startswith("Not told"))
    assert "as assumed: back.npz allows 0 to" in found.figures(39.0)["eye dipole, rms of each component"].remark


def test_signals_of_a_file_give_the_strengths(tmp_path):
    """White signals through an EDF file with labels of another fashion: planted values inside the intervals."""
    study = study_of(*SMALL_STUDY)
    signals = white_recording(covariance_of(**PLANTED), (1.0, 40.0), 90, 128, np.random.default_rng(0))
    labels = [f"EEG {name.upper()}-LE" for name in NAMES]
    path = write_signals(tmp_path / "rest.edf", labels, signals, 128, largest=500.0)
    recorded = calibrated(with_file(study, path), patches(study)).recorded
    for name, planted in PLANTED.items():
        one = recorded.fit.strengths[name]
        assert one.low < planted < one.high
        assert one.status == "fitted"
    assert recorded.fit.probability > 0.01
    assert "references named in labels: LE" in recorded.notes[-1]


def test_zones_of_contact_noise_are_those_of_the_recording_too(tmp_path):
    """Bare skin with half the noise: planted so, fitted as one factor on both."""
    more = "contact_noise_in_uv = { forehead = 0.5 }\n"
    study = study_of(SPHERE, TWO_REGIONS, cups(4, 'family = "10-20"', more), BAND)
    own = np.where(np.isin(NAMES, ["Fp1", "Fp2"]), 0.5, 1.0) * UV
    covariance = covariance_of(background=1.2, eyes=0.5) + np.diag((1.5 * own) ** 2)
    found = build_problem(with_file(study, save(tmp_path / "rest.npz", covariance)))
    assert found.calibration.recorded.fit.strengths["contacts"].amplitude == pytest.approx(1.5, rel=1e-5)
    assert set(np.round(found.sensor_sd / UV, 4)) == {0.75, 1.5}


def test_magnetometers_and_fields_from_outside(tmp_path):
    """Electrodes and coils recorded together: the coils' own noise and the surroundings are told as well."""
    study = study_of(*BOTH_KINDS)
    assumed = noise_parts()[1]
    head, labels = study.head, patches(study)
    points = np.array([study.standard[name] for name in NAMES])
    out = (points - points.mean(axis=0)) / np.linalg.norm(points - points.mean(axis=0), axis=1)[:, None]
    places = points * (1 + 0.012 / np.linalg.norm(points, axis=1))[:, None]
    n = len(NAMES)
    magnetometers = Channels(places, out, np.zeros(n, dtype=bool), out)
    channels = joined(electrodes_at(points), magnetometers)
    columns = 1.2 * assumed.density * background_columns(channels, study.cortex, labels, head.cortex.areas)
    eyes = 0.5 * assumed.eye * channels.eye_gain(study.cortex).reshape(2 * n, -1)
    field = 300 * FT * channels.axes
    own = np.repeat([(1.5 * UV) ** 2, (20 * FT) ** 2 * 39], n)
    covariance = columns @ columns.T + eyes @ eyes.T + field @ field.T + np.diag(own)
    path = save(
        tmp_path / "both.npz",
        covariance,
        (*NAMES, *(f"M{i}" for i in range(n))),
        ["V"] * n + ["T"] * n,
        positions_mm=1e3 * channels.positions,
        axes=channels.axes,
    )
    study = with_file(study, path)
    found = calibrated(study, labels)
    brief = as_recorded(study.brief, found)
    assert brief.noise.field_rms == pytest.approx(300 * FT, rel=1e-3, abs=0)
    assert brief.noise.gradient_rms == 0
    assert brief.stock[1].noise_density == pytest.approx(20 * FT, rel=1e-3, abs=0)
    assert brief.stock[0].contact_noise == pytest.approx(1.5 * UV, rel=1e-3, abs=0)
    assert found.density == pytest.approx(1.2 * assumed.density, rel=1e-3, abs=0)
    assert found.recorded.fit.strengths["gradients"].status == "assumed"
    figures = found.figures(39.0)
    assert figures["magnetometers' own noise"].value == pytest.approx(20, rel=1e-3)
    assert figures["field from outside, rms of each component"].value == pytest.approx(300, rel=1e-3)


def test_magnetometers_alone(tmp_path):
    """No reference, nothing about contacts: coils on the scalp normals see brain, eyes and their own noise."""
    study = study_of(*BOTH_KINDS)
    assumed, labels = noise_parts()[1], patches(study)
    points = np.array([study.standard[name] for name in NAMES])
    out = points / np.linalg.norm(points, axis=1)[:, None]
    coils_there = Channels(points + 0.012 * out, out, np.zeros(len(NAMES), dtype=bool), out)
    columns = 1.2 * assumed.density * background_columns(coils_there, study.cortex, labels, study.head.cortex.areas)
    eyes = 0.5 * assumed.eye * coils_there.eye_gain(study.cortex).reshape(len(NAMES), -1)
    covariance = columns @ columns.T + eyes @ eyes.T + (20 * FT) ** 2 * 39 * np.eye(len(NAMES))
    places = {"positions_mm": 1e3 * coils_there.positions, "axes": out}
    study = with_file(study, save(tmp_path / "coils.npz", covariance, unit="T", **places))
    found = calibrated(study, labels)
    assert found.density == pytest.approx(1.2 * assumed.density, rel=1e-3, abs=0)
    stock = as_recorded(study.brief, found).stock
    assert stock[1].noise_density == pytest.approx(20 * FT, rel=1e-3, abs=0)
    assert stock[0] == study.brief.stock[0]
    assert "says nothing of contact noise" in " ".join(found.recorded.notes)


def test_stock_entries_like_the_recorded_sensors(exact):
    two = (
        SPHERE,
        TWO_REGIONS,
        cups(4, 'family = "10-20"'),
        cups(2, 'family = "10-20"').replace('"cup"', '"dry"'),
        BAND,
    )
    study = study_of(*two)
    first, second = (
        as_recorded(one.brief, calibrated(one, patches(one))).stock
        for one in (with_file(study, exact, reference="T7", **keys) for keys in ({}, {"sensors": ("dry",)}))
    )
    assert [entry.contact_noise / UV for entry in first] == pytest.approx([1.5, 1.0], rel=1e-6)
    assert [entry.contact_noise / UV for entry in second] == pytest.approx([1.0, 1.5], rel=1e-6)
    with pytest.raises(BriefError, match=r"must name electrodes or magnetometers of the stock \(cup, dry\), but 'wet'"):
        calibrated(with_file(study, exact, reference="T7", sensors=("wet",)), patches(study))
    with pytest.raises(BriefError, match="must name one entry of electrodes, but cup, dry were given"):
        calibrated(with_file(study, exact, reference="T7", sensors=("cup", "dry")), patches(study))


def test_positions_must_be_those_of_this_head(tmp_path):
    study = study_of(*SMALL_STUDY)
    points = 1e3 * np.array([study.standard[name] for name in NAMES])
    far = save(tmp_path / "far.npz", covariance_of(**PLANTED), positions_mm=points + np.array([0, 0, 80]))
    with pytest.raises(FileError, match=r"electrodes must lie within 30 mm of the scalp, but \w+ is \d+ mm off"):
        calibrated(with_file(study, far), patches(study))
    axes = np.zeros((19, 3))
    axes[4] = [0, 0, 1]
    inside = save(
        tmp_path / "inside.npz",
        covariance_of(**PLANTED),
        unit=["T" if i == 4 else "V" for i in range(19)],
        positions_mm=0.8 * points,
        axes=axes,
    )
    with pytest.raises(FileError, match="magnetometers must lie outside the head, but Fz does not"):
        calibrated(with_file(study, inside), patches(study))
