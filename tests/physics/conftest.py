"""Small heads made of icospheres, and finite differences."""

import numpy as np
import pytest
from made_heads import make_head

from layout.anatomy.head import Head


@pytest.fixture(scope="session")
def ellipsoid_head() -> Head:
    return make_head(np.array([0.068, 0.084, 0.072]), np.array([0.001, 0.004, 0.04]))


@pytest.fixture(scope="session")
def round_head() -> Head:
    """Exact spheres given only as surfaces."""
    return make_head(np.full(3, 0.08), np.array([0.002, -0.003, 0.045]))


@pytest.fixture(scope="session")
def sphere_head() -> Head:
    """The same spheres, declared."""
    centre = np.array([0.002, -0.003, 0.045])
    return make_head(np.full(3, 0.08), centre, sphere=(centre, np.array([0.08, 0.086, 0.093])))


@pytest.fixture(scope="session")
def jacobian():
    """Fourth-order central differences: d function(point) / d point, point (3,) -> (..., 3)."""

    def differentiate(function, point, step):
        columns = []
        for axis in np.eye(3):
            near = function(point + step * axis) - function(point - step * axis)
            far = function(point + 2 * step * axis) - function(point - 2 * step * axis)
            columns.append((8 * near - far) / (12 * step))
        return np.stack(columns, axis=-1)

    return differentiate
