"""Shared results and pictures; make_result is imported from made_result."""

import pytest
from made_result import make_result

from layout.outputs.result import DesignResult


@pytest.fixture(scope="session")
def result() -> DesignResult:
    return make_result()


@pytest.fixture(scope="session")
def electrodes_only() -> DesignResult:
    return make_result("electrode")


@pytest.fixture(scope="session")
def magnetometers_only() -> DesignResult:
    return make_result("magnetometer")


@pytest.fixture(scope="session")
def pictures(result):
    from layout.outputs.pictures.figure import scalp_pictures

    return scalp_pictures(result)
