"""Makes the synthetic head of this folder importable, and shares one with all tests."""

import sys
from pathlib import Path

import pytest

sys.path.insert(0, str(Path(__file__).parent))


@pytest.fixture(scope="session")
def head():
    from synthetic_head import ellipsoid_head

    return ellipsoid_head()


@pytest.fixture(scope="session")
def standard(head):
    from layout.anatomy.positions import earlobes, standard_positions

    return standard_positions(head.scalp, head.landmarks) | earlobes(head.scalp, head.landmarks)
