"""The three answers, built by hand from an invented three-mode example."""

import pytest
from invented_results import example


@pytest.fixture
def unstable():
    return example("unstable")


@pytest.fixture
def stable():
    return example("stable")


@pytest.fixture
def undecided():
    return example("undecided")


@pytest.fixture(scope="session")
def build():
    """The builder itself, for tests that need other node names or axes."""
    return example
