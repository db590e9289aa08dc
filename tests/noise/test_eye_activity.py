"""Eyes: as strong as stated at Fp1 and Fp2, and felt most in front."""

from dataclasses import replace

import numpy as np
import pytest
from studies import BAND, HANDS, SPHERE, TEMPLATE, TWO_REGIONS, cups, study_of

from layout.anatomy.positions import family_names
from layout.design import build_problem
from layout.noise.eyes import eye_columns, eye_moment
from layout.physics.channels import electrodes_at


@pytest.fixture(params=["sphere", pytest.param("template", marks=pytest.mark.slow)])
def study(request):
    head, regions = {"sphere": (SPHERE, TWO_REGIONS), "template": (TEMPLATE, HANDS)}[request.param]
    return study_of(head, regions, cups(6, 'family = "10-20"'), BAND)


def seen_against_mean(study, strength):
    """name -> rms of the eyes' potential at the 10-20 sites [V], for a moment rms of `strength` [A·m]."""
    names = [name for name in family_names("10-20") if name in study.standard]
    channels = electrodes_at(np.array([study.standard[name] for name in names]))
    columns = eye_columns(channels.eye_gain(study.cortex), strength)
    centring = np.eye(len(names)) - 1 / len(names)
    return dict(zip(names, np.sqrt(np.diag(centring @ columns @ columns.T @ centring)), strict=True))


def test_frontal_rms_is_the_stated_one(study):
    louder = replace(study, brief=replace(study.brief, noise=replace(study.brief.noise, eyes_rms=35e-6)))
    seen = seen_against_mean(study, build_problem(louder).calibration.eye)
    assert np.sqrt((seen["Fp1"] ** 2 + seen["Fp2"] ** 2) / 2) == pytest.approx(35e-6, rel=1e-12, abs=0)


def test_eyes_are_felt_most_in_front(study):
    seen = seen_against_mean(study, 1.0)
    assert min(seen["Fp1"], seen["Fp2"]) > max(size for name, size in seen.items() if not name.startswith("Fp"))
    assert max(seen["O1"], seen["O2"], seen["C3"], seen["C4"]) < min(seen["Fp1"], seen["Fp2"]) / 3
    assert seen["Fp1"] == pytest.approx(seen["Fp2"], rel=0.1)  # near mirror symmetry


def test_moment_from_a_simulation():
    """Random moments of the strength found give the rms asked for."""
    rng = np.random.default_rng(3)
    gain = rng.standard_normal((5, 2, 3))
    frontal = np.array([True, True, False, False, False])
    moment = eye_moment(gain, frontal, 2.0)
    potential = moment * np.einsum("nek,dek->dn", gain, rng.standard_normal((200_000, 2, 3)))
    potential -= potential.mean(axis=1, keepdims=True)
    assert np.sqrt((potential[:, frontal] ** 2).mean()) == pytest.approx(2.0, rel=0.01)


def test_without_eyes_there_is_no_such_nuisance():
    study = study_of(SPHERE, TWO_REGIONS, cups(6, 'family = "10-20"'), BAND)
    noise = study.brief.noise
    quiet = replace(study, brief=replace(study.brief, noise=replace(noise, eyes_rms=0.0)))
    with_eyes, without = build_problem(study), build_problem(quiet)
    assert without.calibration.eye == 0
    assert with_eyes.model.nuisance.shape[1] - without.model.nuisance.shape[1] == 6
    assert not any("eye" in label for label in without.calibration.figures(39.0))
