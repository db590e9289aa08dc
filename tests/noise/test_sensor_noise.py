"""The sensors' own noise: density times the root of the bandwidth, contacts by zone."""

from dataclasses import replace

import numpy as np
import pytest
from references import gradiometers as ref
from studies import BAND, SPHERE, TWO_REGIONS, coils, cups, study_of

from layout.noise.sensor import sensor_noise

ZONES = 'contact_noise_in_uv = { forehead = 0.5, "left brow" = 3 }\n'
PLACES = '[places]\n[[places.zones]]\nname = "left brow"\naround = ["Fp1"]\nradius_mm = 12\n'


@pytest.fixture
def study():
    return study_of(SPHERE, TWO_REGIONS, cups(4, more=ZONES), coils(3, more='axes = "three_axis"\n'), PLACES, BAND)


def noise_of(study):
    return sensor_noise(study.head, study.brief, study.candidates, study.standard)


def test_magnetometers_by_density_and_bandwidth(study):
    noise = noise_of(study)
    mags = ~study.candidates.is_electrode
    np.testing.assert_allclose(noise[mags], 10e-15 * np.sqrt(40 - 1), rtol=1e-14)
    assert mags.sum() == 3 * (study.candidates.kind == 1).sum()
    wider = replace(study, brief=replace(study.brief, noise=replace(study.brief.noise, band=(1.0, 157.0))))
    np.testing.assert_allclose(noise_of(wider)[mags], 2 * noise[mags], rtol=1e-14)
    np.testing.assert_array_equal(noise_of(wider)[~mags], noise[~mags])  # stated in the band, whatever it is


def test_contacts_by_zone_the_last_one_named_wins(study):
    candidates = study.candidates
    noise = noise_of(study)
    by_site = {
        candidates.sites.names[candidates.site[candidate]]: value
        for candidate, value, electrode in zip(
            candidates.candidate_of_channel, noise, candidates.is_electrode, strict=True
        )
        if electrode
    }
    assert by_site["Fp2"] == pytest.approx(0.5e-6, abs=0)
    assert by_site["Fp1"] == pytest.approx(3e-6, abs=0)  # in both zones
    assert {by_site[name] for name in ("Cz", "Pz", "C3", "Oz", "F3")} == {1e-6}


def test_the_difference_of_two_coils_is_root_two_times_as_noisy():
    """Nardelli et al. 2020: 10 fT/sqrt(Hz) each, uncorrelated, baseline 20 mm."""
    pair = (
        '[[stock]]\nkind = "gradiometer"\nname = "pair"\ncount = 2\nsites = { family = "10-20" }\nform = "planar"\n'
        f"baseline_mm = {ref.PAIR_BASELINE_MM}\nhousing_mm = [28, 28, 30]\n"
        f"coil_noise_ft_per_rthz = {ref.COIL_FT_PER_RTHZ}\n"
    )
    noise = noise_of(study_of(SPHERE, TWO_REGIONS, pair, BAND))
    np.testing.assert_allclose(noise / 1e-15 / np.sqrt(40 - 1), ref.PAIR_FT_PER_RTHZ, rtol=1e-12)
