"""What all tests share: one BLAS thread, as in the application (two threads slow the engine's small products)."""

import pytest
from threadpoolctl import threadpool_limits


@pytest.fixture(autouse=True, scope="session")
def one_blas_thread():
    with threadpool_limits(1):
        yield
