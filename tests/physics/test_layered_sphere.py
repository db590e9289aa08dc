"""The electric lead field against published identities, tables, a closed form and 60-digit solutions."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from references import sphere_potentials as ref
from scipy.spatial.transform import Rotation

from layout.errors import LayoutError
from layout.physics.layered_sphere import degree_factors, electric_lead_field
from layout.units import UV

FIVE = ((0.077, 0.079, 0.082, 0.086, 0.092), (0.33, 1.79, 0.006, 0.03, 0.43))
MODELS = {"homogeneous": ref.HOMOGENEOUS, "three": ref.S3, "four": ref.S4, "five": FIVE}


def random_directions(rng, n):
    v = rng.normal(size=(n, 3))
    return v / np.linalg.norm(v, axis=1, keepdims=True)


@pytest.mark.parametrize("row", ref.TABLE)
def test_tabulated_potentials(row):
    (radii, conductivities), axis, expected = ref.TABLE[row]
    angles = np.radians(ref.ANGLES)
    electrodes = np.stack([np.sin(angles), 0 * angles, np.cos(angles)], axis=1)
    gain = electric_lead_field(electrodes, [[0, 0, ref.DIPOLE_HEIGHT]], radii, conductivities)
    found = gain[:, 0, axis] * ref.MOMENT / UV
    compared = 0
    for value, wanted in zip(found, expected, strict=True):
        if wanted is not None:
            assert abs(value - wanted) <= ref.TOLERANCE_UV
            compared += 1
    assert compared >= 6


@pytest.mark.parametrize("eccentricity", [0.0, 0.3, 0.8, 0.99, 0.999])
def test_one_layer_equals_closed_form(eccentricity):
    rng = np.random.default_rng(1)
    radius, conductivity = 0.09, 0.33
    electrodes = radius * random_directions(rng, 300)
    sources = eccentricity * radius * random_directions(rng, 20)
    exact = ref.homogeneous_closed_form(electrodes, sources, radius, conductivity)
    found = electric_lead_field(electrodes, sources, [radius], [conductivity], tolerance=1e-12)
    above, below = np.array([[0, 0, radius]]), np.array([[0, 0, eccentricity * radius]])
    peak = np.abs(ref.homogeneous_closed_form(above, below, radius, conductivity)).max()
    assert np.abs(found - exact).max() <= 2e-12 * peak


@pytest.mark.parametrize("layers", [2, 3, 4, 5])
def test_equal_conductivities_equal_one_layer(layers):
    rng = np.random.default_rng(2)
    radii = np.linspace(0.075, 0.09, layers)
    electrodes, sources = random_directions(rng, 200), 0.07 * random_directions(rng, 15)
    one = electric_lead_field(electrodes, sources, [0.09], [0.33])
    many = electric_lead_field(electrodes, sources, radii, np.full(layers, 0.33))
    np.testing.assert_allclose(many, one, rtol=0, atol=1e-14 * np.abs(one).max())


@pytest.mark.slow
@pytest.mark.parametrize("model", ["three", "four", "five"])
@pytest.mark.parametrize("eccentricity", [0.5, 0.98, 0.99])
def test_layered_equals_high_precision_solution(model, eccentricity):
    radii, conductivities = MODELS[model]
    rng = np.random.default_rng(3)
    source = eccentricity * radii[0] * random_directions(rng, 1)[0]
    beside = source / np.linalg.norm(source) + 0.1 * random_directions(rng, 1)[0]
    moment = rng.normal(size=3)
    electrodes = np.stack([source, -source, beside, random_directions(rng, 1)[0]])
    found = electric_lead_field(electrodes, source[None], radii, conductivities, moments=moment[None])[:, 0]
    x = np.linalg.norm(source) / radii[-1]
    n_terms = int(np.log(1e-15) / np.log(x)) + 20
    exact = [ref.layered_potential(e, source, moment, radii, conductivities, n_terms) for e in electrodes]
    radial = electric_lead_field(source[None], source[None], radii, conductivities)
    peak = np.linalg.norm(radial) * np.linalg.norm(moment)
    np.testing.assert_allclose(found, exact, rtol=0, atol=1e-9 * peak)


@pytest.mark.parametrize("model", MODELS)
def test_stated_tolerance_is_kept_and_used(model):
    """Coarse series differ from the converged one by less than promised, and by something."""
    radii, conductivities = MODELS[model]
    rng = np.random.default_rng(4)
    electrodes = random_directions(rng, 400)
    for eccentricity in (0.4, 0.8, 0.99):
        source = eccentricity * radii[0] * random_directions(rng, 1)
        everywhere = np.concatenate([electrodes, source])
        exact = electric_lead_field(everywhere, source, radii, conductivities, tolerance=1e-14)
        peak = exact[-1, 0] @ source[0] / np.linalg.norm(source)
        for tolerance in (1e-2, 1e-4, 1e-6):
            coarse = electric_lead_field(everywhere, source, radii, conductivities, tolerance=tolerance)
            radial = (coarse - exact)[:, 0] @ source[0] / np.linalg.norm(source)
            worst = np.abs(radial).max()
            assert tolerance * peak / 50 < worst <= tolerance * peak


def test_factors_at_high_degree_reach_their_limit():
    """Derived: at high degree an interface acts alone, f_n -> (2n+1)/n Π 2 σ_j/(σ_j + σ_j+1) / σ_1."""
    for radii, conductivities in (ref.S3, ref.S4, FIVE):
        s = np.array(conductivities)
        factors = degree_factors(radii, conductivities, 100_000)
        assert np.all(np.isfinite(factors))
        assert np.all(factors > 0)
        limit = 2 * np.prod(2 * s[:-1] / (s[:-1] + s[1:])) / s[0]
        assert factors[-1] == pytest.approx(limit, rel=1e-4)


@pytest.mark.parametrize("model", MODELS)
def test_central_source_is_exact_and_continuous(model):
    radii, conductivities = MODELS[model]
    electrodes = random_directions(np.random.default_rng(5), 50)
    centre = electric_lead_field(electrodes, np.zeros((1, 3)), radii, conductivities)[:, 0]
    if model == "homogeneous":
        dipole = 3 * electrodes / (4 * np.pi * conductivities[0] * radii[0] ** 2)
        np.testing.assert_allclose(centre, dipole, rtol=1e-14, atol=1e-12)
    for axis in np.eye(3):
        near = electric_lead_field(electrodes, 1e-12 * axis[None], radii, conductivities)[:, 0]
        np.testing.assert_allclose(near, centre, rtol=0, atol=1e-9 * np.abs(centre).max())


@pytest.mark.parametrize("model", MODELS)
def test_collinear_electrode(model):
    """Straight above and below (c = ±1) nothing is divided by zero and tangential moments give nothing."""
    radii, conductivities = MODELS[model]
    direction = np.array([0.3, -0.5, 0.81])
    direction /= np.linalg.norm(direction)
    across = np.cross(direction, [0, 0, 1.0])
    source = 0.95 * radii[0] * direction
    gain = electric_lead_field(np.stack([direction, -direction]), source[None], radii, conductivities)[:, 0]
    assert gain[0] @ direction > 0 > gain[1] @ direction
    assert np.abs(gain @ across).max() < 1e-13 * np.abs(gain).max()
    aside = electric_lead_field(direction[None] + 1e-9 * across, source[None], radii, conductivities)[0, 0]
    np.testing.assert_allclose(aside, gain[0], rtol=0, atol=1e-7 * np.abs(gain).max())


def test_fixed_equals_free_times_moment_and_only_direction_counts():
    rng = np.random.default_rng(6)
    electrodes, sources = rng.normal(size=(300, 3)), 0.07 * random_directions(rng, 40)
    moments = rng.normal(size=(40, 3))
    free = electric_lead_field(electrodes, sources, *ref.S4)
    fixed = electric_lead_field(7.3 * electrodes, sources, *ref.S4, moments=moments)
    assert fixed.shape == (300, 40)
    np.testing.assert_allclose(fixed, np.einsum("nmk,mk->nm", free, moments), rtol=0, atol=1e-13 * np.abs(fixed).max())


@pytest.mark.parametrize("model", MODELS)
def test_zero_mean_over_the_surface(model):
    radii, conductivities = MODELS[model]
    z, weights = np.polynomial.legendre.leggauss(400)
    phi = 2 * np.pi * np.arange(801) / 801
    rho = np.sqrt(1 - z**2)[:, None]
    points = np.stack([rho * np.cos(phi), rho * np.sin(phi), np.repeat(z[:, None], 801, 1)], axis=-1)
    gain = electric_lead_field(points.reshape(-1, 3), [[0.02, 0.03, 0.055]], radii, conductivities)[:, 0]
    mean = np.einsum("i,ijk->k", weights, gain.reshape(400, 801, 3)) / (2 * 801)
    assert np.abs(mean).max() < 1e-12 * np.abs(gain).max()


@pytest.mark.parametrize("model", MODELS)
def test_lead_field_is_curl_free_and_divergence_free_in_the_source(model, jacobian):
    radii, conductivities = MODELS[model]
    rng = np.random.default_rng(7)
    electrodes = random_directions(rng, 12)

    def lead(point):
        return electric_lead_field(electrodes, point[None], radii, conductivities, tolerance=1e-15)[:, 0]

    for source in 0.055 * random_directions(rng, 3):
        slope = jacobian(lead, source, 2e-4)
        size = np.linalg.norm(slope, axis=(1, 2))
        assert np.all(np.abs(np.trace(slope, axis1=1, axis2=2)) < 1e-7 * size)
        assert np.all(np.linalg.norm(slope - slope.transpose(0, 2, 1), axis=(1, 2)) < 1e-7 * size)


@settings(max_examples=30, deadline=None)
@given(
    angles=st.tuples(*[st.floats(-3.1, 3.1)] * 3),
    place=st.tuples(*[st.floats(-0.044, 0.044)] * 3),
)
def test_rotating_everything_changes_nothing(angles, place):
    turn = Rotation.from_rotvec(angles).as_matrix()
    electrodes = random_directions(np.random.default_rng(8), 20)
    source = np.array([place])
    plain = electric_lead_field(electrodes, source, *ref.S4)[:, 0]
    turned = electric_lead_field(electrodes @ turn.T, source @ turn.T, *ref.S4)[:, 0]
    np.testing.assert_allclose(turned, plain @ turn.T, rtol=0, atol=1e-11 * np.abs(plain).max())


def test_size_and_conductivity_scale():
    rng = np.random.default_rng(9)
    electrodes, sources = random_directions(rng, 30), 0.07 * random_directions(rng, 5)
    radii, conductivities = np.array(ref.S3[0]), np.array(ref.S3[1])
    plain = electric_lead_field(electrodes, sources, radii, conductivities)
    scaled = electric_lead_field(electrodes, 3 * sources, 3 * radii, 2 * conductivities)
    np.testing.assert_allclose(scaled, plain / 18, rtol=1e-10, atol=1e-12 * np.abs(plain).max())


def test_skull_is_known_by_its_resistance_per_area():
    """Near-invariant (JSMBE 35(3):279, 1997): skull σ/t fixes the scalp potentials far more than σ or t."""
    rng = np.random.default_rng(10)
    electrodes, source = random_directions(rng, 200), np.array([[0.02, 0.01, 0.06]])

    def potentials(thickness, skull):
        radii = [0.080, 0.080 + thickness, 0.080 + thickness + 0.006]
        return electric_lead_field(electrodes, source, radii, [0.33, skull, 0.33])[:, 0]

    usual = potentials(5e-3, 0.0042)
    same_ratio = np.linalg.norm(potentials(6e-3, 0.0042 * 6 / 5) - usual)
    same_conductivity = np.linalg.norm(potentials(6e-3, 0.0042) - usual)
    assert same_ratio < 0.35 * same_conductivity


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"sources": [[0, 0, 0.0791]]}, "inside the brain shell"),
        ({"sources": [[0, 0, np.nan]]}, "inside the brain shell"),
        ({"electrodes": [[0, 0, 0]]}, "direction from the centre"),
        ({"radii": (0.079, 0.08, 0.08, 0.09)}, "increase outward"),
        ({"radii": (0.08, 0.09)}, "as many conductivities"),
        ({"radii": np.linspace(0.08, 0.09, 6), "conductivities": np.ones(6)}, "1 to 5 radii"),
        ({"conductivities": (0.3, 1.5, 0, 0.3)}, "must be positive"),
        ({"moments": np.ones((2, 3))}, "one row per source"),
        ({"radii": (0.09,), "conductivities": (0.3,), "sources": [[0, 0, 0.09 * (1 - 1e-7)]]}, "too close"),
    ],
)
def test_impossible_input_is_one_sentence(change, words):
    given_values = {
        "electrodes": [[0, 0, 1.0]],
        "sources": [[0, 0, 0.07]],
        "radii": ref.S4[0],
        "conductivities": ref.S4[1],
        "moments": None,
    } | change
    with pytest.raises(LayoutError, match=words) as caught:
        electric_lead_field(
            given_values["electrodes"],
            given_values["sources"],
            given_values["radii"],
            given_values["conductivities"],
            moments=given_values["moments"],
        )
    assert "\n" not in str(caught.value)


def test_empty_input():
    assert electric_lead_field(np.empty((0, 3)), [[0, 0, 0.07]], *ref.S4).shape == (0, 1, 3)
    assert electric_lead_field([[0, 0, 1.0]], np.empty((0, 3)), *ref.S4).shape == (1, 0, 3)
