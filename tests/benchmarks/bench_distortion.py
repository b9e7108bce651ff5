"""Time of distortion on a design the process has not seen, as a ratio to scipy's eigh of order 400 in the same run.

Run by hand: ``python tests/benchmarks/bench_distortion.py``. One BLAS thread; every timed call is a random change of film
or geometry (seeded), whose linear response is known, as on the page; 60 frequencies from 20 Hz to 5 kHz, 8 harmonics, at
the sample's own amplitude. "again" is the other law, or another amplitude, of the same design. Then 3 s of noise at
48 kHz rendered: of a new design, and again with the other law; and the process's largest memory.
"""

import resource
import statistics
import time
from pathlib import Path

import numpy as np
import scipy.linalg
from threadpoolctl import threadpool_limits

import engine

SAMPLES = Path(__file__).parents[2]/"sample_designs"
FREQUENCY = np.geomspace(20, 5000, 60)
TARGET = {"bench-back": 10.0}
CALLS = 9


def seconds(call, *arguments):
    start = time.perf_counter()
    call(*arguments)
    return time.perf_counter() - start


def random_change(design, rng):
    """The design with every film and geometry number moved by up to 3 %."""
    moved = ("geometry.frame_radius", "geometry.centre_radius", "film.thickness", "film.prestretch", "film.shear_modulus")
    return design.with_values({path: design.value(path)*rng.uniform(0.97, 1.03) for path in moved})


def main():
    rng = np.random.default_rng(22)
    matrix = rng.standard_normal((400, 400))
    matrix = matrix + matrix.T
    print(f"{'sample':18}{'sine':>8}{'root':>8}{'target':>8}{'again':>8}{'settled':>9}   eigh(400), ms")
    with threadpool_limits(1):
        for name in ("fern-label", "bench-back", "palm-house-arch"):
            design = engine.load(SAMPLES/f"{name}.toml")
            engine.distortion(design, FREQUENCY)
            cold, again, reference, settled = {"sine": [], "square-root": []}, [], [], []
            for _ in range(CALLS):
                for law, other in (("sine", "square-root"), ("square-root", "sine")):
                    changed = random_change(design, rng).with_values({"drive.law": law})
                    engine.response(changed)
                    cold[law].append(seconds(engine.distortion, changed, FREQUENCY))
                    again.append(seconds(engine.distortion, changed.with_values({"drive.law": other}), FREQUENCY))
                    settled.append(engine.distortion(changed, FREQUENCY).converged.mean())
                    reference.append(seconds(scipy.linalg.eigh, matrix))
            unit = statistics.median(reference)
            sine, root = (statistics.median(each)/unit for each in cold.values())
            print(f"{name:18}{sine:8.2f}{root:8.2f}{TARGET.get(name, float('nan')):8.2f}{statistics.median(again)/unit:8.2f}"
                  f"{np.mean(settled):9.3f}   {unit*1e3:.1f}")


def rendering():
    """3 s of low-passed noise that reaches the full amplitude, medium sample."""
    rng = np.random.default_rng(23)
    matrix = rng.standard_normal((400, 400))
    matrix = matrix + matrix.T
    noise = np.cumsum(rng.standard_normal(3*48000))
    noise -= np.convolve(noise, np.ones(2000)/2000, "same")
    noise /= np.abs(noise).max()
    design = engine.load(SAMPLES/"bench-back.toml")
    with threadpool_limits(1):
        cold, again, reference = [], [], []
        for _ in range(3):
            changed = random_change(design, rng)
            engine.response(changed)
            cold.append(seconds(engine.render, changed, noise, 48000))
            again.append(seconds(engine.render, changed.with_values({"drive.law": "square-root"}), noise, 48000))
            reference += [seconds(scipy.linalg.eigh, matrix) for _ in range(3)]
    unit = statistics.median(reference)
    print(f"{'3 s rendered':18}{statistics.median(cold)/unit:8.1f}{'':8}{200.0:8.1f}{statistics.median(again)/unit:8.1f}"
          f"   largest memory {resource.getrusage(resource.RUSAGE_SELF).ru_maxrss/2**20:.2f} GiB of 1")


if __name__ == "__main__":
    rendering()
    main()
