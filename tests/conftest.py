"""What all tests share: one BLAS thread, as in the application (two threads slow the engine's small products)."""

import pytest
from threadpoolctl import threadpool_limits


@pytest.fixture(autouse=True, scope="session")
def one_blas_thread():
    with threadpool_limits(1):
        yield


def pytest_collection_modifyitems(items):
    """Browser tests last: their driver leaves an event loop running in the process, where others start one."""
    items.sort(key=lambda item: "browser" in item.path.parts)
