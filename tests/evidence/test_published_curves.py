"""What is published on how information and errors go with the number of channels, as facts without their numbers."""

import numpy as np
import pytest
from studies import SPHERE, TWO_REGIONS, coils, cups, study_of

from layout.design.objective import build_objective
from layout.design.problem import build_problem
from layout.engine.search import exchange, greedy
from layout.evidence.curve import of_count
from layout.evidence.spread import even_spread

BAND = "[noise]\nband_hz = [1, 40]\naverages = 100\n"
FINE = "[noise.background]\npatch_cm2 = 4\n"
ERRORS = '[goal]\nkind = "localisation"\n'
COUNTS = (25, 50, 100, 200, 400)


def objective_of(*tables):
    study = study_of(*tables)
    return study, build_objective(study, (build_problem(study),))


def even_values(study, objective, counts):
    """Printed values of even spreads."""
    points = study.candidates.sites.positions[study.candidates.site]
    return np.array([objective.printed(objective.goal.score(even_spread(points, n))) for n in counts])


def squid(standoff, noise="5"):
    return coils(5, "grid_mm = 11", f"standoff_mm = {standoff}\n").replace("rthz = 10", f"rthz = {noise}")


@pytest.mark.slow
def test_errors_fall_with_more_electrodes_and_ever_less():
    """Monotone with diminishing returns: Sohrabpour et al. 2015, Clin Neurophysiol 126:472 (32 to 128 electrodes)."""
    study, objective = objective_of(SPHERE, TWO_REGIONS, cups(5, "grid_mm = 15"), BAND, ERRORS)
    errors = even_values(study, objective, (32, 64, 96, 128))
    gains = -np.diff(errors)
    assert (gains > 0).all()
    assert (np.diff(gains) < 0).all()


@pytest.mark.slow
def test_brain_noise_makes_more_channels_pay_less_and_sensor_noise_does_not():
    """White noise: accuracy rises with channels throughout; correlated brain noise: the gain fades beyond 100 to 200
    channels (Vrba, Robinson & McCubbin 2004, Neurol Clin Neurophysiol 2004:99). There it stops, with fits that do not
    whiten; what is left here is what whitening and averaging of the sensors' own noise still give.
    """
    head = SPHERE.replace("coarse", "standard")
    errors = {}
    for name, rms in (("brain", ""), ("white", "eeg_uv_rms = 0.0001\n")):
        study, objective = objective_of(head, TWO_REGIONS, squid(20), BAND + FINE + rms, ERRORS)
        errors[name] = even_values(study, objective, COUNTS)
    falls = {name: values[:-1] / values[1:] for name, values in errors.items()}
    np.testing.assert_allclose(falls["white"][1:], np.sqrt(2), rtol=0.06)  # errors go with 1 / sqrt(channels)
    assert falls["brain"][0] > 2 > falls["brain"][1] > 1.4
    assert (falls["brain"][2:] < 1.25).all()
    assert (errors["brain"] > errors["white"]).all()


@pytest.mark.slow
def test_choosing_helps_at_few_channels_and_meets_an_even_spread_at_many():
    """Iivanainen et al. 2021, NeuroImage 245:118747."""
    study, objective = objective_of(SPHERE, TWO_REGIONS, coils(5, "grid_mm = 25"), BAND)
    total = len(study.candidates)
    ratios = []
    for count in (6, total // 3, total - 8):
        rules = of_count(study.feasible, count)
        _, best, _ = exchange(objective.goal, rules, greedy(objective.goal, rules))
        ratios.append(best / even_values(study, objective, (count,))[0])
    assert ratios[0] > 1.5
    assert ratios[0] > ratios[1] > ratios[2]
    assert 1 <= ratios[2] < 1.05


@pytest.mark.slow
@pytest.mark.parametrize("standoff", [20, 30])
def test_on_scalp_arrays_carry_more_than_ones_farther_off(standoff):
    """Of as many sensors at the same noise: Boto et al. 2016, PLoS ONE 11:e0157655; Iivanainen, Stenroos & Parkkonen
    2017, NeuroImage 147:542. Even when those farther off have the lower noise of cooled sensors.
    """
    near = even_values(*objective_of(SPHERE, TWO_REGIONS, squid(6.5, "10"), BAND), (100,))[0]
    same = even_values(*objective_of(SPHERE, TWO_REGIONS, squid(standoff, "10"), BAND), (100,))[0]
    cooled = even_values(*objective_of(SPHERE, TWO_REGIONS, squid(standoff, "3"), BAND), (100,))[0]
    assert near > 1.4 * same
    assert near > cooled > same
