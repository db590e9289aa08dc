"""Boundary elements against finite elements of a general library on the template's own shape.

Measured: finite elements against the closed forms RDM* 0.1 % (EEG) and 0.4 % (MEG); boundary elements of 492 nodes a
surface against finite elements on the same polyhedra 0.4 % and 0.2 %.
"""

import numpy as np
import pytest
from boundary_spheres import RADII, SIGMA, directions, rdm_and_mag, sphere_model

from layout.physics import layered_sphere, sarvas
from layout.physics.boundary_elements import electric_lead_field, magnetic_lead_field
from layout.physics.boundary_model import boundary_head

pytest.importorskip("skfem")
pytest.importorskip("pyamg")

NODES = 492
DEPTHS = (12e-3, 45e-3)


@pytest.fixture(scope="module", autouse=True)
def own_cache(tmp_path_factory):
    with pytest.MonkeyPatch.context() as patch:
        patch.setenv("SCALPSITE_CACHE", str(tmp_path_factory.mktemp("cache")))
        yield


def setting(model, n_sources=60, n_sensors=10, seed=1):
    """The finite elements on the model's surfaces, scalp nodes, magnetometers and elements that hold the sources."""
    from finite_element_head import FiniteElementHead

    from layout.physics.nearest_point import nearest_on_surface

    surfaces = model.surfaces
    finite = FiniteElementHead(tuple(part.vertices for part in surfaces), surfaces[0].faces, model.conductivities)
    rng = np.random.default_rng(seed)
    upper = np.flatnonzero(surfaces[2].vertices[:, 2] > surfaces[2].vertices[:, 2].mean())
    numbers = rng.choice(upper, n_sensors, replace=False)
    above = surfaces[2].vertices[numbers] + 6.5e-3 * surfaces[2].normals[numbers]
    brain = np.flatnonzero(finite.mesh[1] == model.conductivities[0])
    places = finite.middles(brain)[1]
    depth = nearest_on_surface(surfaces[0], places).inside_depth
    high = (depth > DEPTHS[0]) & (depth < DEPTHS[1]) & (places[:, 2] > places[:, 2].mean())
    elements = rng.choice(brain[high], n_sources, replace=False)
    return (
        finite,
        numbers,
        np.tile(above, (2, 1)),
        np.vstack([surfaces[2].normals[numbers], directions(rng, n_sensors)]),
        elements,
    )


def differences(found, exact):
    """Median RDM*, and the largest distance of MAG from 1."""
    rdm, mag = rdm_and_mag(found, exact)
    return np.median(rdm), np.abs(mag - 1).max()


@pytest.mark.slow
def test_finite_elements_are_right_on_spheres():
    """The judge is judged first: series and Sarvas formula."""
    model = sphere_model(7)
    finite, numbers, points, axes, elements = setting(model)
    sources = finite.middles(elements)[1]
    found = finite.electric(numbers, elements).reshape(len(numbers), -1)
    exact = layered_sphere.electric_lead_field(model.surfaces[2].vertices[numbers], sources, RADII, SIGMA)
    typical, size = differences(found, exact.reshape(len(numbers), -1))
    assert typical < 0.005
    assert size < 0.06
    few = elements[:4]
    moments = np.cross(sources[:4], directions(np.random.default_rng(3), 4))
    moments /= np.linalg.norm(moments, axis=1, keepdims=True)
    found = finite.magnetic(points, axes, few, moments)
    typical, size = differences(found, sarvas.magnetic_lead_field(points, axes, sources[:4], moments=moments))
    assert typical < 0.01
    assert size < 0.05


@pytest.mark.slow
def test_boundary_and_finite_elements_agree_on_the_template():
    from layout.anatomy.template import build_template

    model = boundary_head(build_template("coarse"), SIGMA, NODES).model
    finite, numbers, points, axes, elements = setting(model)
    sources = finite.middles(elements)[1]
    found = electric_lead_field(model, model.surfaces[2].vertices[numbers], sources).reshape(len(numbers), -1)
    typical, size = differences(found, finite.electric(numbers, elements).reshape(len(numbers), -1))
    assert typical < 0.01
    assert size < 0.06
    few, moments = elements[:4], directions(np.random.default_rng(3), 4)
    found = magnetic_lead_field(model, points, axes, sources[:4], moments)
    typical, size = differences(found, finite.magnetic(points, axes, few, moments))
    assert typical < 0.01
    assert size < 0.05
