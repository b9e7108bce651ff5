"""Long work: progress is told, stop ends it, a newer job silences an older one, an error is an outcome."""

import asyncio
import threading
from concurrent.futures import ThreadPoolExecutor

import pytest

from app.worker import Job
from engine.errors import InvalidDesign, Stopped


@pytest.fixture
def executor():
    with ThreadPoolExecutor(1) as pool:
        yield pool


def counting(n, gate, progress, stop):
    """Counts to n, telling how far; waits at the gate before each step."""
    for i in range(n):
        gate.wait()
        if stop():
            raise Stopped("told to stop")
        progress(i / n)
    return n


def run(steps):
    asyncio.run(asyncio.wait_for(steps, 10))


async def until(found):
    while not found():
        await asyncio.sleep(0)


def test_progress_and_result_are_told(executor, monkeypatch):
    monkeypatch.setattr("app.worker.PROGRESS_EVERY", 0.0)
    told, gate = [], threading.Event()
    gate.set()

    async def steps():
        job = Job(told.append, executor)
        job.start(counting, 4, gate)
        assert job.busy
        await until(lambda: told and told[-1].outcome is not None)
        assert not job.busy
    run(steps())
    assert [stage.part for stage in told] == [0.0, 0.25, 0.5, 0.75, 1.0] and told[-1].outcome.result == 4
    assert told[0].seconds_left is None and told[2].seconds_left == pytest.approx(told[2].seconds)


def test_stop_ends_it_and_says_so(executor):
    told, gate = [], threading.Event()

    async def steps():
        job = Job(told.append, executor)
        job.start(counting, 4, gate)
        job.stop()
        gate.set()
        await until(lambda: told)
    run(steps())
    assert told[-1].outcome.failure.kind == "stopped"


def test_a_newer_job_silences_the_older(executor):
    told, gate = [], threading.Event()

    async def steps():
        job = Job(told.append, executor)
        job.start(counting, 1000, gate)
        job.start(counting, 2, gate)
        gate.set()
        await until(lambda: told and told[-1].outcome is not None)
    run(steps())
    assert [stage.outcome.result for stage in told if stage.outcome] == [2]


def test_an_error_is_an_outcome(executor):
    told = []

    def fails(progress, stop):
        raise InvalidDesign("no such clip")

    async def steps():
        job = Job(told.append, executor)
        job.start(fails)
        await until(lambda: told)
    run(steps())
    assert told[0].outcome.failure.text == "no such clip" and told[0].outcome.failure.kind == "invalid"
