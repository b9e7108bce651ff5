"""Time of the air load and of the sound at the listener, as ratios to scipy's eigh of order 400 in the same run.

Run by hand: ``python tests/benchmarks/bench_radiation.py``. One BLAS thread, 400 frequencies, best of 7; the tables are
timed from an empty store, so that run order matters: each largest k b is built once.
"""

import time

import numpy as np
import scipy.linalg
from threadpoolctl import threadpool_limits

from engine import radiation

SPEED, DENSITY = 343.0, 1.2


def best(call, repeats=7):
    """Shortest of several calls, seconds."""
    taken = []
    for _ in range(repeats):
        start = time.perf_counter()
        call()
        taken.append(time.perf_counter() - start)
    return min(taken)


def show(label, seconds, eigh):
    print(f"{label:60}{1e3*seconds:9.2f} ms {seconds/eigh:8.3f}")


def main():
    rng = np.random.default_rng(7)
    matrix = rng.standard_normal((400, 400))
    matrix = matrix + matrix.T
    with threadpool_limits(1):
        eigh = best(lambda: scipy.linalg.eigh(matrix))
        show("eigh(400)", eigh, eigh)
        for x_max, J in ((4.0, 64), (16.0, 64), (64.0, 64), (64.0, 128)):
            show(f"tables to k b = {x_max:g}, {J} polynomials, first call",
                 best(lambda x_max=x_max, J=J: radiation.prepare(x_max, J), 1), eigh)
        for x_max, J in ((3.0, 48), (12.0, 64), (60.0, 128)):
            table, x = radiation.tables(x_max, J), np.geomspace(x_max/250.0, x_max, 400)
            for m in (10, 20, 40):
                c = rng.standard_normal((J, m))

                def load(c=c, x=x, table=table):
                    T = radiation.interpolation(x, table)
                    return [T @ rows for rows in radiation.impedance_tables(c, table)]

                show(f"air load: k b to {x_max:g}, {J} polynomials, {m} shapes", best(load), eigh)
        for b, f_max, angle in ((0.05, 5e3, 0.0), (0.05, 5e3, 0.7), (0.09, 5e3, 0.7), (0.2, 2e4, 0.7)):
            r, area = radiation.disk_points(b, 150)
            flow, k = rng.standard_normal((150, 40))*area[:, None], 2.0*np.pi*np.geomspace(20.0, f_max, 400)/SPEED
            call = (r, 0.2*(b - r), flow, k, 1.0, angle, DENSITY, SPEED)
            show(f"listener at {angle:g} rad: frame {1e3*b:g} mm, to {f_max:g} Hz, 150 points, 40 shapes",
                 best(lambda call=call: radiation.listener_transfer(*call)), eigh)


if __name__ == "__main__":
    main()
