"""Products of two tones, as IEC 60268 names them."""

from dataclasses import dataclass

import numpy as np

from engine import balance, harmonic
from engine.distortion import checked, conditions_of, part_of, pressure_of, top_of
from engine.errors import InvalidDesign
from engine.response import basis_for
from engine.statics import frozen


@dataclass(frozen=True)
class Intermodulation:
    """Products of two tones: order (m, n) stands for the frequency m f1 + n f2."""

    order: np.ndarray                # (n_products, 2) int, positive frequencies, ascending
    frequency: np.ndarray            # (n_products,) Hz
    pressure: np.ndarray             # (n_products,) complex Pa
    modulation_2: float              # IEC 60268 modulation distortion of 2nd order, arithmetic sums about f2
    modulation_3: float
    difference_2: float              # difference-frequency distortion of 2nd order, f2 - f1 over the tones' sum
    difference_3: float              # of 3rd order, 2f1 - f2 and 2f2 - f1
    converged: bool
    conditions: tuple


def intermodulation(design, f1, f2, amplitude=None, ratio=1.0, most=3):
    """Products of two tones f1 < f2 in Hz, each of the amplitude in V (f1's times ratio), up to |m| + |n| = most.

    The square-root law shapes the sum of both. Source of the figures: IEC 60268-3 and -5, from memory.
    """
    f1, f2 = float(f1), float(f2)
    checked([f1, f2], 8)
    if not f1 < f2:
        raise InvalidDesign("Give two frequencies, the lower one first.")
    v = design.drive.amplitude if amplitude is None else float(amplitude)
    products = [(m, n) for m in range(-most, most + 1) for n in range(-most, most + 1)
                if 0 < abs(m) + abs(n) <= most and m*f1 + n*f2 > 0]
    products.sort(key=lambda c: c[0]*f1 + c[1]*f2)
    order = np.array([(0, 0), *products])
    side = 4*most + 8
    grid = 2*np.pi*np.arange(side)/side
    a, b = (g.ravel() for g in np.meshgrid(grid, grid, indexing="ij"))
    theta = np.outer(a, order[:, 0]) + np.outer(b, order[:, 1])
    signal = v*(ratio*np.cos(a) + np.cos(b))
    V = design.drive.bias
    if design.drive.law == "square-root":
        if np.min(V**2 + 2*V*signal) < 0:
            raise InvalidDesign("The square-root law has no value for this signal: lower the amplitude.", "drive.amplitude")
        signal = np.sqrt(V**2 + 2*V*signal) - V
    frequency = order @ np.array([f1, f2])
    system, basis = basis_for(design, top_of(frequency))
    omega = 2*np.pi*frequency[None]
    task = harmonic.problem(system, basis, omega, theta)
    drive = harmonic.components(task, signal[None, :, None])[..., 0]
    solved = balance.balance(task, drive)
    pressure = pressure_of(design, system, basis, task, omega, solved)[0]
    at = {tuple(o): abs(p) for o, p in zip(order[1:], pressure, strict=True)}
    tone = at[0, 1]
    both = at[1, 0] + at[0, 1]
    return Intermodulation(
        order=frozen(order[1:]), frequency=frozen(frequency[1:]), pressure=frozen(pressure),
        modulation_2=float(part_of(at.get((-1, 1), 0) + at.get((1, 1), 0), tone)),
        modulation_3=float(part_of(at.get((-2, 1), 0) + at.get((2, 1), 0), tone)),
        difference_2=float(part_of(at.get((-1, 1), 0), both)),
        difference_3=float(part_of(at.get((2, -1), 0) + at.get((-1, 2), 0), both)),
        converged=bool(solved.converged[0]), conditions=conditions_of(design, system, frequency[1:2], np.ones(1), solved)[0])
