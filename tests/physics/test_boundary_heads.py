"""Boundary elements on heads: few nodes, sources and sensors where they are, derivatives, the template's bands."""

import dataclasses
import itertools

import numpy as np
import pytest
import trimesh
from boundary_spheres import directions, rdm_and_mag

from layout.anatomy.head import Surface
from layout.errors import LayoutError
from layout.physics import layered_sphere, sarvas
from layout.physics.boundary_meshes import boundary_surfaces, geodesic_sphere, volume
from layout.physics.boundary_model import LEAST_DEPTH, LEAST_EYE_DEPTH, LEAST_EYE_GAP, boundary_head
from layout.physics.nearest_point import nearest_on_surface
from layout.physics.sphere_derivatives import electric_derivatives, magnetic_derivatives

SIGMA = (0.33, 0.33 / 80, 0.33)
NODES = 490


@pytest.fixture(scope="module", autouse=True)
def own_cache(tmp_path_factory):
    with pytest.MonkeyPatch.context() as patch:
        patch.setenv("SCALPSITE_CACHE", str(tmp_path_factory.mktemp("cache")))
        yield


@pytest.fixture(scope="module")
def round_model(round_head):
    return boundary_head(round_head, SIGMA, NODES)


def channels_on(head, n=40, seed=2):
    """Positions, axes, is_electrode: half electrodes, half magnetometers 6.5 mm above, on the upper scalp."""
    rng = np.random.default_rng(seed)
    sites = rng.choice(np.flatnonzero(head.scalp.vertices[:, 2] > 0.03), n, replace=False)
    is_electrode = np.arange(n) % 2 == 0
    positions = head.scalp.vertices[sites] + np.where(is_electrode, 0, 6.5e-3)[:, None] * head.scalp.normals[sites]
    return positions, directions(rng, n) * ~is_electrode[:, None], is_electrode


@pytest.mark.parametrize("frequency", [1, 2, 5, 10])
def test_geodesic_sphere(frequency):
    sphere = geodesic_sphere(frequency)
    assert len(sphere.vertices) == 10 * frequency**2 + 2
    assert sphere.mesh.is_watertight
    np.testing.assert_allclose(np.linalg.norm(sphere.vertices, axis=1), 1)
    assert volume(sphere) == pytest.approx(sphere.mesh.volume, rel=1e-12)
    assert 0 < volume(sphere) < 4 * np.pi / 3
    edges = sphere.mesh.edges_unique_length
    assert edges.max() / edges.min() < 1.45


@pytest.mark.parametrize("nodes", [400, 1000])
def test_few_nodes_keep_shape_volume_and_nesting(ellipsoid_head, nodes):
    originals = ellipsoid_head.inner_skull, ellipsoid_head.outer_skull, ellipsoid_head.scalp
    surfaces = boundary_surfaces(ellipsoid_head, nodes)
    for few, many in zip(surfaces, originals, strict=True):
        assert abs(len(few.vertices) - nodes) < 0.1 * nodes
        assert few.mesh.is_watertight
        assert volume(few) == pytest.approx(volume(many), rel=1e-9)
        assert np.abs(nearest_on_surface(few, many.vertices).inside_depth).max() < 1e-3
    for inner, outer in itertools.pairwise(surfaces):
        assert nearest_on_surface(outer, inner.vertices).inside_depth.min() > 5e-3


def test_a_head_that_is_not_star_shaped_is_decimated(ellipsoid_head):
    """Rings: no ray from their middle meets them once, and a decimated ring is still a ring."""
    inner = trimesh.creation.torus(0.04, 0.012, major_sections=60, minor_sections=30)
    around = [trimesh.creation.torus(0.04, 0.012 + gap, major_sections=60, minor_sections=30) for gap in (0.006, 0.012)]
    rings = [Surface(np.asarray(mesh.vertices), np.asarray(mesh.faces)) for mesh in (inner, *around)]
    head = dataclasses.replace(ellipsoid_head, inner_skull=rings[0], outer_skull=rings[1], scalp=rings[2])
    surfaces = boundary_surfaces(head, 500)
    for few, many in zip(surfaces, rings, strict=True):
        assert few.mesh.is_watertight
        assert few.mesh.euler_number == 0
        assert 400 < len(few.vertices) < 600
        assert volume(few) == pytest.approx(volume(many), rel=1e-9)


def test_an_overhang_is_never_read_along_rays(ellipsoid_head):
    """A flap such as an ear: some rays meet the scalp three times, so the scalp's own faces must be kept."""
    scalp = ellipsoid_head.scalp
    vertices = scalp.vertices.copy()
    side = np.linalg.norm(vertices - [0.082, 0.004, 0.04], axis=1)
    vertices += np.exp(-((side / 0.012) ** 2))[:, None] * [0.02, -0.03, 0]
    head = dataclasses.replace(ellipsoid_head, scalp=Surface(vertices, scalp.faces))
    middle = ellipsoid_head.inner_skull.vertices.mean(axis=0)
    assert boundary_surfaces(ellipsoid_head, 400)[2].vertices.shape == (362, 3)
    few = boundary_surfaces(head, 400)[2]
    corners = few.vertices[few.faces] - middle
    across = np.cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0])
    assert np.einsum("fi,fi->f", across, corners[:, 0]).min() < 0
    assert np.abs(nearest_on_surface(few, vertices).inside_depth).max() < 2e-3


def test_surfaces_that_touch_are_refused(ellipsoid_head):
    close = Surface(ellipsoid_head.inner_skull.vertices * 1.002, ellipsoid_head.inner_skull.faces)
    with pytest.raises(LayoutError, match="inner and outer skull must stay 2 mm apart"):
        boundary_surfaces(dataclasses.replace(ellipsoid_head, outer_skull=close), 400)


@pytest.mark.slow
def test_lead_field_in_the_head_frame_against_the_series(round_head, round_model):
    """Exact spheres given as surfaces: centre off the origin, order of the channels, normals, all in place."""
    positions, axes, is_electrode = channels_on(round_head)
    centre, radii = round_head.inner_skull.vertices.mean(axis=0), np.array([0.080, 0.086, 0.093])
    rng = np.random.default_rng(1)
    sources = centre + 0.062 * directions(rng, 30)
    normals = np.cross(sources - centre, directions(rng, 30))
    normals /= np.linalg.norm(normals, axis=1, keepdims=True)
    gain = round_model.lead_field(positions, axes, is_electrode, sources, normals)
    electric = layered_sphere.electric_lead_field(
        positions[is_electrode] - centre, sources - centre, radii, SIGMA, moments=normals
    )
    magnetic = sarvas.magnetic_lead_field(
        positions[~is_electrode] - centre, axes[~is_electrode], sources - centre, moments=normals
    )
    # the upper half of the scalp has a mean of its own
    found = gain[is_electrode] - gain[is_electrode].mean(axis=0)
    for numeric, exact in ((found, electric - electric.mean(axis=0)), (gain[~is_electrode], magnetic)):
        rdm, mag = rdm_and_mag(numeric, exact)
        assert rdm.max() < 0.03
        assert np.abs(mag - 1).max() < 0.03
    free = round_model.lead_field(positions, axes, is_electrode, sources)
    for rows in (is_electrode, ~is_electrode):
        combined = np.einsum("nmj,mj->nm", free[rows], normals)
        np.testing.assert_allclose(combined, gain[rows], rtol=0, atol=1e-12 * np.abs(gain[rows]).max())


def test_derivatives_against_the_closed_forms_of_the_sphere(round_head, round_model):
    positions, axes, is_electrode = channels_on(round_head)
    centre, radii = round_head.inner_skull.vertices.mean(axis=0), np.array([0.080, 0.086, 0.093])
    rng = np.random.default_rng(1)
    sources, moments = centre + 0.055 * directions(rng, 20), directions(rng, 20)
    transfers = round_model.transfers(positions, axes, is_electrode)
    gain, slopes = round_model.derivatives(transfers, sources, moments)
    np.testing.assert_array_equal(gain, round_model.read(transfers, sources))
    on_scalp, coils = positions[is_electrode] - centre, positions[~is_electrode] - centre
    electric = electric_derivatives(on_scalp, sources - centre, radii, SIGMA, moments)
    magnetic = magnetic_derivatives(coils, axes[~is_electrode], sources - centre, moments)
    for rows, exact in ((is_electrode, electric), (~is_electrode, magnetic)):
        difference = np.linalg.norm(slopes[rows] - exact, axis=(0, 2)) / np.linalg.norm(exact, axis=(0, 2))
        assert np.median(difference) < 0.03


def test_step_study_of_the_derivatives(round_head, round_model):
    """Between steps of 0.2 and 1 mm nothing changes: 1 mm is on the plateau for a source 10 mm deep."""
    positions, axes, is_electrode = channels_on(round_head)
    transfers = round_model.transfers(positions, axes, is_electrode)
    centre = round_head.inner_skull.vertices.mean(axis=0)
    sources, moments = (
        centre + 0.07 * directions(np.random.default_rng(3), 10),
        directions(np.random.default_rng(4), 10),
    )
    small, usual, large = (
        round_model.derivatives(transfers, sources, moments, step).slopes for step in (2e-4, 1e-3, 4e-3)
    )
    size = np.linalg.norm(usual)
    assert np.linalg.norm(usual - small) < 1e-3 * size
    assert np.linalg.norm(large - small) > 10 * np.linalg.norm(usual - small)


def test_sources_stay_or_come_inside(round_head, round_model):
    centre = round_head.inner_skull.vertices.mean(axis=0)
    towards = directions(np.random.default_rng(0), 50)
    deep = round_model.place_sources(centre + 0.06 * towards)
    np.testing.assert_array_equal(deep.positions, centre + 0.06 * towards)
    assert not deep.held.any()
    assert not deep.near.any()
    high = round_model.place_sources(centre + 0.0801 * towards)
    assert high.held.all()
    assert high.near.all()
    depth = nearest_on_surface(round_model.model.surfaces[0], high.positions).inside_depth
    np.testing.assert_allclose(depth, LEAST_DEPTH, atol=5e-5)


def test_electrodes_move_less_than_a_millimetre(round_head, round_model):
    moves = round_model.electrode_moves(round_head.scalp.vertices)
    assert moves.max() < 1.2e-3
    assert moves.mean() > 0


def test_eyes_stand_between_skull_and_scalp(ellipsoid_head):
    """13 mm of skin cannot hold 10 mm above and 5 below everywhere: they then give way to the skull."""
    gaps = []
    for radius in (0.06, 0.092, 0.12):
        eyes = np.array([[-0.4, 0.9, 0.1], [0.4, 0.9, 0.1]]) * radius + [0.001, 0.004, 0.04]
        model = boundary_head(dataclasses.replace(ellipsoid_head, eyes=eyes), SIGMA, 400)
        gaps.append(-nearest_on_surface(model.model.surfaces[1], model.eyes).inside_depth)
        assert nearest_on_surface(model.model.surfaces[2], model.eyes).inside_depth.min() > 0
        assert gaps[-1].min() > 0.8 * min(LEAST_EYE_GAP, 0.0065)
    assert LEAST_EYE_DEPTH > LEAST_EYE_GAP


def test_eye_gain_has_its_peak_in_front_of_the_eye(ellipsoid_head):
    """A forward dipole in the left eye: positive before it, larger there than anywhere; the right eye mirrors it."""
    model = boundary_head(ellipsoid_head, SIGMA, 400)
    scalp = ellipsoid_head.scalp.vertices
    gain = model.eye_gain(scalp, np.zeros_like(scalp), np.ones(len(scalp), bool))[:, :, 1]
    assert gain.shape == (len(scalp), 2)
    for eye, place in enumerate(model.eyes):
        peak = scalp[np.argmax(np.abs(gain[:, eye]))]
        assert gain[np.argmax(np.abs(gain[:, eye])), eye] > 0
        assert np.linalg.norm(peak - place) < 0.035


def test_other_numbers_of_conductivities_are_refused(ellipsoid_head):
    with pytest.raises(LayoutError, match="boundary elements need 3"):
        boundary_head(ellipsoid_head, (0.33, 1.79, 0.0042, 0.33), 400)


@pytest.mark.slow
def test_radial_suppression_on_the_template_is_in_the_published_band():
    """Weakest over strongest orientation of a source, median over the cortex: 0.06 MEG, 0.63 EEG (Ahlfors et al. 2010,
    Brain Topogr 23:227, helmet and cap of their own); the band allows for this head, three-axis on-scalp magnetometers.
    """
    from layout.anatomy.template import build_template

    head = build_template("coarse")
    model = boundary_head(head, SIGMA)
    sites = np.flatnonzero(head.scalp.vertices[:, 2] > 0.0)[::6]
    on_scalp, outward = head.scalp.vertices[sites], head.scalp.normals[sites]
    sources = head.cortex.positions[::10]
    above = on_scalp + 0.02 * outward
    electric = model.lead_field(on_scalp, np.zeros_like(on_scalp), np.ones(len(sites), bool), sources)
    magnetic = model.lead_field(above, outward, np.zeros(len(sites), bool), sources)
    ratios = []
    for gain in (electric - electric.mean(axis=0), magnetic):
        strengths = np.linalg.svd(np.moveaxis(gain, 1, 0), compute_uv=False)
        ratios.append(np.median(strengths[:, 2] / strengths[:, 0]))
    assert 0.4 < ratios[0] < 0.85
    assert 0.02 < ratios[1] < 0.15
