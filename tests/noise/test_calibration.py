"""One background density, fixed so that the scalp EEG is what the brief says, and then held."""

from dataclasses import replace

import numpy as np
import pytest
from references.brain_noise import EEG_PEAK_TO_PEAK_UV, LARGEST_DENSITY_NAM_PER_MM2, MAGNETIC_FT_PER_RTHZ
from studies import BAND, HANDS, SPHERE, TEMPLATE, TWO_REGIONS, coils, cups, problem_of, study_of

from layout.anatomy.patches import cortex_patches
from layout.anatomy.positions import family_names
from layout.anatomy.scalp_points import normals_at, project
from layout.design import build_problem
from layout.noise.assemble import assemble_noise
from layout.noise.calibration import Figure, calibrate
from layout.physics.channels import candidate_channels, electrodes_at
from layout.physics.lead_field import compute_lead_field
from layout.physics.sphere_model import map_sources


@pytest.fixture
def study():
    return study_of(SPHERE, TWO_REGIONS, cups(4, 'family = "10-20"'), coils(3, "grid_mm = 40"), BAND)


def calibration_sites(study):
    sites = {name: study.standard[name] for name in family_names("10-20") if name in study.standard}
    return sites, normals_at(study.head.scalp, project(study.head.scalp, np.array(list(sites.values()))))


NOMINAL = (0.33, 0.0165, 0.33)  # brain, skull, scalp [S/m]: skull 1/20 of the brain


def calibrated(study, cortex=None, **changed):
    labels = cortex_patches(study.head.cortex, study.brief.noise.patch_area)
    noise = replace(study.brief.noise, **changed)
    return calibrate(cortex or study.cortex, np.array(NOMINAL), noise, labels, *calibration_sites(study))


def free_patch_covariance(study, points, axes, density, sphere=None):
    """Covariance (n, n) of the background on a sphere head, patch by patch; axes None: electrodes."""
    cortex = study.head.cortex
    labels = cortex_patches(cortex, study.brief.noise.patch_area)
    n = len(points)
    electrode = np.full(n, axes is None)
    sphere = sphere or study.cortex.sphere
    gain = compute_lead_field(
        sphere,
        study.head,
        points,
        np.zeros((n, 3)) if axes is None else axes,
        electrode,
        np.zeros((n, 3)) if axes is None else axes,
        map_sources(sphere, study.head, cortex.positions, None),
    ).gain
    covariance = np.zeros((n, n))
    for patch in np.unique(labels):
        members = labels == patch
        moment = np.einsum("nmk,m->nk", gain[:, members], density * cortex.areas[members])
        covariance += moment @ moment.T / 3
    return covariance


def test_eeg_comes_out_as_asked(study):
    points = np.array(list(calibration_sites(study)[0].values()))
    found = calibrated(study, eeg_rms=11e-6)
    centring = np.eye(len(points)) - 1 / len(points)
    covariance = centring @ free_patch_covariance(study, points, None, found.density) @ centring
    assert np.sqrt(np.trace(covariance) / len(points)) == pytest.approx(11e-6, rel=1e-10, abs=0)
    assert found.eeg == 11e-6


@pytest.mark.parametrize(("gap", "which"), [(0.020, "magnetic_off"), (0.0065, "magnetic_on")])
def test_magnetic_rms_is_what_direct_computation_gives(study, gap, which):
    sites, normals = calibration_sites(study)
    found = calibrated(study)
    points = np.array(list(sites.values())) + gap * normals
    variance = np.diag(free_patch_covariance(study, points, normals, found.density))
    assert getattr(found, which) == pytest.approx(np.sqrt(variance.mean()), rel=1e-10, abs=0)


def test_figures_print_the_same_numbers(study):
    found = calibrated(study)
    values = {label: figure.value for label, figure in found.figures(39.0).items()}
    assert values["background EEG, rms at 10-20 sites"] == pytest.approx(7.5)
    assert values["background field 20 mm off the scalp, rms"] == pytest.approx(found.magnetic_off * 1e15)
    assert values["background field 6.5 mm off the scalp, rms"] == pytest.approx(found.magnetic_on * 1e15)
    assert values["background moment density, rms"] == pytest.approx(found.density * 1e-6 * 1e9)
    assert values["eye dipole, rms of each component"] == pytest.approx(found.eye * 1e9)


def test_a_figure_outside_its_band_says_on_which_side():
    sides = [Figure(value, "fT", "5-9 fT", 5.0, 9.0).outside for value in (4.9, 5.0, 9.0, 9.1)]
    assert sides == ["below", "", "", "above"]
    assert [Figure(value, "nAm", "below 2", high=2.0).outside for value in (-9.0, 2.1)] == ["", "above"]
    assert Figure(1e9, "nAm").outside == ""


def test_the_field_is_no_verdict_on_a_brief_without_magnetometers(study):
    """Both rms values stay printed beside their bands; the field so near the scalp has none and is left out."""
    with_coils, without = (calibrated(study).figures(4.0, coils) for coils in (True, False))
    field = "background field 20 mm off the scalp, rms"
    assert (with_coils[field].judged, without[field].judged) == (True, False)
    assert with_coils[field].value == without[field].value
    assert "for comparison" in without[field].remark
    assert with_coils.keys() - without.keys() == {"background field 6.5 mm off the scalp, rms"}


def test_strengths_are_proportional_to_what_is_asked(study):
    once, twice = calibrated(study), calibrated(study, eeg_rms=15e-6)
    assert twice.density == pytest.approx(2 * once.density, abs=0)
    assert twice.magnetic_off == pytest.approx(2 * once.magnetic_off, abs=0)
    assert twice.eye == pytest.approx(once.eye, abs=0)


def test_noise_is_held_when_conductivities_change(study):
    """The calibration of the nominal head serves another conductivity: the density stays, the EEG does not."""
    found = calibrated(study)
    other = study.cortex.with_conductivities(np.array([0.33, 0.33 / 80, 0.33]))
    channels = candidate_channels(study.candidates)
    labels = cortex_patches(study.head.cortex, study.brief.noise.patch_area)
    ones = np.ones(len(channels))
    here, there = (
        assemble_noise(channels, cortex, study.brief.noise, found, labels, study.head.cortex.areas, ones)
        for cortex in (study.cortex, other)
    )
    coil = ~channels.is_electrode
    background = here.parts["background"]
    np.testing.assert_allclose(there.nuisance[coil, background], here.nuisance[coil, background], rtol=1e-12)
    quieter = there.nuisance[~coil, background].std() / here.nuisance[~coil, background].std()
    assert quieter < 0.8  # a skull four times as resistive
    points = electrodes_at(channels.positions[~coil])
    direct = points.lead_field(other, np.arange(len(labels)), free=True).gain
    patch = labels == 3
    expected = found.density * np.einsum("nmk,m->nk", direct[:, patch], study.head.cortex.areas[patch]) / np.sqrt(3)
    np.testing.assert_allclose(there.nuisance[~coil, 9:12], expected, rtol=1e-9, atol=1e-12 * np.abs(expected).max())


@pytest.mark.parametrize("skull", [0.33 / 80, 0.33 / 8])
def test_strengths_are_those_of_the_nominal_head_whatever_the_brief_says(study, skull):
    """A brief of another skull: density, eyes and fields as on the nominal head, the EEG they imply printed beside."""
    conductivities = f"conductivities_s_per_m = [0.33, {skull}, 0.33]\n"
    here = study_of(SPHERE + conductivities, TWO_REGIONS, cups(4, 'family = "10-20"'), coils(3, "grid_mm = 40"), BAND)
    for found, nominal in (
        (build_problem(here).calibration, build_problem(study).calibration),
        (calibrated(study, here.cortex), calibrated(study)),
    ):
        assert (found.density, found.eye, found.eeg) == (nominal.density, nominal.eye, nominal.eeg)
        assert (found.magnetic_off, found.magnetic_on) == (nominal.magnetic_off, nominal.magnetic_on)
        assert nominal.eeg_here == nominal.eeg == 7.5e-6
    points = np.array(list(calibration_sites(study)[0].values()))
    centring = np.eye(len(points)) - 1 / len(points)
    covariance = centring @ free_patch_covariance(study, points, None, found.density, here.cortex.sphere) @ centring
    implied = np.sqrt(np.trace(covariance) / len(points))
    assert here.cortex.conductivities[1] == skull
    assert found.eeg_here == pytest.approx(implied, rel=1e-10, abs=0)
    assert (implied < 0.8 * 7.5e-6) if skull < 0.0165 else (implied > 1.2 * 7.5e-6)
    figures = found.figures(39.0)
    assert [figures[name].value for name in list(figures)[:2]] == pytest.approx([7.5, 1e6 * implied])
    assert "nominal head" in next(iter(figures.values())).remark
    assert figures.keys() - nominal.figures(39.0).keys() == {"background EEG implied here, rms"}


def test_regions_are_left_out_of_the_background_unless_asked(study):
    noise = replace(study.brief.noise, regions_in_background=True)
    everywhere = build_problem(replace(study, brief=replace(study.brief, noise=noise)))
    without = build_problem(study)
    assert everywhere.calibration == without.calibration  # of the whole cortex either way
    assert (without.model.nuisance**2).sum() < (everywhere.model.nuisance**2).sum()
    members = np.concatenate([region.members for region in study.regions])
    assert len(members) == len(np.unique(members))


@pytest.mark.slow
def test_default_brief_on_the_template_lies_inside_both_bands():
    """Defaults for [1, 40] Hz: EEG and the field 20 mm off the scalp satisfy their bands at once."""
    problem = problem_of(TEMPLATE, HANDS, cups(4, 'family = "10-20"'), BAND)
    figures = problem.calibration.figures(39.0)
    eeg = figures["background EEG, rms at 10-20 sites"]
    low, high = (size / np.sqrt(8) for size in EEG_PEAK_TO_PEAK_UV)  # a sine's rms from its peak-to-peak
    assert (low < eeg.value < high, eeg.unit) == (True, "µV")
    field = figures["background field 20 mm off the scalp, rms"]
    low, high = (rate * np.sqrt(39) for rate in MAGNETIC_FT_PER_RTHZ)
    assert (low < field.value < high, field.unit) == (True, "fT")
    assert field.band.startswith(f"{low:.0f}-{high:.0f} fT")
    assert (field.low, field.high) == pytest.approx((low, high))
    assert figures["background field 6.5 mm off the scalp, rms"].value > field.value
    assert figures["background moment density, rms"].value < LARGEST_DENSITY_NAM_PER_MM2
    assert not any(figure.outside for figure in figures.values())
