"""Time of one response on a design the process has not seen, as a ratio to scipy's eigh of order 400 in the same run.

Run by hand: ``python tests/benchmarks/bench_engine.py``. One BLAS thread; every timed call is a random change of film or
geometry (seeded), 400 frequencies from 20 Hz to 5 kHz; the reference is timed between the calls.
"""

import statistics
import time
from pathlib import Path

import numpy as np
import scipy.linalg
from threadpoolctl import threadpool_limits

import engine

SAMPLES = Path(__file__).parents[2]/"sample_designs"
TARGETS = {"fern-label": 0.75, "bench-back": 1.5, "palm-house-arch": 3.0}
FREQUENCY = np.geomspace(20, 5000, 400)
CALLS = 25


def seconds(call, *arguments):
    start = time.perf_counter()
    call(*arguments)
    return time.perf_counter() - start


def random_change(design, rng):
    """The design with every film and geometry number moved by up to 3 %."""
    moved = ("geometry.frame_radius", "geometry.centre_radius", "film.thickness", "film.prestretch", "film.shear_modulus")
    return design.with_values({path: design.value(path)*rng.uniform(0.97, 1.03) for path in moved})


def main():
    rng = np.random.default_rng(20)
    matrix = rng.standard_normal((400, 400))
    matrix = matrix + matrix.T
    print(f"{'sample':18}{'full':>7}{'target':>8}{'listener':>10}{'target':>8}   eigh(400), ms")
    with threadpool_limits(1):
        for name, target in TARGETS.items():
            design = engine.load(SAMPLES/f"{name}.toml")
            engine.response(design, FREQUENCY)
            full, light, reference = [], [], []
            for _ in range(CALLS):
                changed = random_change(design, rng)
                full.append(seconds(engine.response, changed, FREQUENCY))
                louder = changed.with_values({"drive.amplitude": changed.drive.amplitude*rng.uniform(0.5, 0.9),
                                              "listener.distance": rng.uniform(0.5, 2.0), "listener.angle": 0.3})
                light.append(seconds(engine.response, louder, FREQUENCY))
                reference.append(seconds(scipy.linalg.eigh, matrix))
            unit = statistics.median(reference)
            print(f"{name:18}{statistics.median(full)/unit:7.2f}{target:8.2f}{statistics.median(light)/unit:10.2f}"
                  f"{0.3:8.2f}   {unit*1e3:.1f}")


def page():
    """What the page asks for at every move of a control: the overview of the medium sample, on its own grid."""
    rng = np.random.default_rng(22)
    matrix = rng.standard_normal((400, 400))
    matrix = matrix + matrix.T
    design = engine.load(SAMPLES/"bench-back.toml")
    engine.overview(design)
    with threadpool_limits(1):
        full, reference = [], []
        for _ in range(CALLS):
            full.append(seconds(engine.overview, random_change(design, rng)))
            reference.append(seconds(scipy.linalg.eigh, matrix))
    print(f"{'overview':18}{statistics.median(full)/statistics.median(reference):7.2f}   {statistics.median(full)*1e3:.1f} ms")


def window():
    """Voltage window of the medium sample: 60 voltages, 8 modes."""
    rng = np.random.default_rng(21)
    matrix = rng.standard_normal((400, 400))
    matrix = matrix + matrix.T
    design = engine.load(SAMPLES/"bench-back.toml")
    with threadpool_limits(1):
        full, reference = [], []
        for _ in range(CALLS):
            full.append(seconds(engine.voltage_window, random_change(design, rng)))
            reference.append(seconds(scipy.linalg.eigh, matrix))
    print(f"{'voltage window':18}{statistics.median(full)/statistics.median(reference):7.2f}{8.0:8.2f}")


if __name__ == "__main__":
    main()
    page()
    window()
