"""The engine's matrices are small: BLAS threads would only slow these tests, several times."""

import pytest
from threadpoolctl import threadpool_limits


@pytest.fixture(autouse=True, scope="session")
def one_thread():
    with threadpool_limits(limits=1):
        yield
