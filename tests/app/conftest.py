"""A design, a clock that stands still, and a computation that answers at once."""

import pytest

from app.worker import attempt
from engine.design import Design


@pytest.fixture
def design():
    return Design()


class Clock:
    """Seconds, moved by hand."""

    def __init__(self):
        self.now = 0.0

    def __call__(self):
        return self.now


@pytest.fixture
def clock():
    return Clock()


class AtOnce:
    """An updater that computes where it is asked, for tests of what is published."""

    def __init__(self, compute, publish):
        self.compute, self.publish, self.closed, self.busy = compute, publish, False, False

    def want(self, *wish):
        if not self.closed:
            self.publish(attempt(self.compute, wish))

    def close(self):
        self.closed = True


@pytest.fixture
def at_once():
    """Makes the `updater` argument of a session out of a function (design, band) -> overview."""
    return lambda compute: lambda publish, ready=None: AtOnce(compute, publish)
