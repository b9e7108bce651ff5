"""Distortion of the driven film: the harmonics of a periodic drive."""

from dataclasses import dataclass, fields, replace
from functools import lru_cache

import numpy as np

from engine import balance, harmonic
from engine.design import Listener
from engine.errors import InvalidDesign
from engine.response import DEFAULT_BAND, basis_for, level, transfer
from engine.statics import Finding, frozen

SAMPLES = 64                  # of a period, at least
MOST_HARMONICS = 32
MOST_FREQUENCIES = 5000
MOST_NUMBERS = 30_000_000     # of the inverses kept at a time
LAWS = ("sine", "square-root")


@dataclass(frozen=True)
class Distortion:
    """Steady periodic sound of the full film at each frequency; amplitudes are peak values, SI, read-only."""

    frequency: np.ndarray            # (n_freq,) Hz
    harmonic_pressure: np.ndarray    # (n_freq, n_harmonics) complex Pa, the fundamental first
    thd: np.ndarray                  # (n_freq,) harmonics over the total
    thd_fundamental: np.ndarray      # (n_freq,) harmonics over the fundamental
    converged: np.ndarray            # (n_freq,) bool
    conditions: tuple                # (n_freq,) of tuples of Finding
    peak_field: np.ndarray           # (n_freq,) V/m, within the cycle
    least_stress: np.ndarray         # (n_freq,) Pa, within the cycle
    centre_motion: np.ndarray        # (n_freq, n_harmonics+1) complex m, the mean shift first
    source_voltage: np.ndarray       # (n_freq, n_harmonics+1) complex V, the mean deviation from the bias first
    amplitude: float                 # V


def distortion(design, frequency, amplitude=None, n_harmonics=8, thorough=True):
    """Harmonics of a design's sound at each frequency, by harmonic balance with the full film force.

    Parameters
    ----------
    frequency : (n_freq,) Hz, of the fundamental.
    amplitude : V, peak; None: the design's.
    n_harmonics : the fundamental counted as one.
    thorough : follow the motion from small amplitudes with Newton's method where the fixed point fails.

    Returns: Distortion. A frequency at which the balance does not settle has converged False, a finding, and the linear
    motion in place of the harmonics.
    Raises: NoRestState, NotConverged (see equilibrium); InvalidDesign for what cannot be computed.
    """
    f = checked(frequency, n_harmonics)
    design = design if amplitude is None else design.with_values({"drive.amplitude": float(amplitude)})
    n_samples = max(SAMPLES, 8*n_harmonics)
    phase = 2*np.pi*np.arange(n_samples)/n_samples
    order = np.arange(n_harmonics + 1)
    drive = components_of(waveform(design.drive, phase), phase, order)
    # the inverses of so many frequencies at a time
    step = max(1, MOST_NUMBERS//(n_harmonics*len(basis_for(design, top_of(f))[1].shapes)**2))
    top = top_of(f)
    return _joined([solve_drive(design, part, order, phase, np.broadcast_to(drive, (len(part), len(order))), top, thorough)
                    for part in np.split(f, np.arange(step, len(f), step))])


def _joined(parts):
    """One Distortion of consecutive pieces of its frequencies."""
    if len(parts) == 1:
        return parts[0]
    every = {}
    for field in fields(Distortion):
        values = [getattr(part, field.name) for part in parts]
        if isinstance(values[0], np.ndarray):
            every[field.name] = frozen(np.concatenate(values))
        else:
            every[field.name] = sum(values, ()) if isinstance(values[0], tuple) else values[0]
    return Distortion(**every)


def solve_drive(design, f, order, phase, drive, top, thorough=True):
    """Distortion at fundamentals f (n_freq,) for source components drive (n_freq, n_harmonics+1)."""
    system, basis = basis_for(design, top)
    omega = 2*np.pi*f[:, None]*order
    task = _problem(replace(design, name="-", note="", drive=replace(design.drive, amplitude=0.0, law="sine"),
                            listener=Listener()), f.tobytes(), len(order), len(phase), top)
    solved = balance.balance(task, drive, thorough)
    pressure = pressure_of(design, system, basis, task, omega, solved)
    power = np.abs(pressure)**2
    harmonics, total = np.sqrt(power[:, 1:].sum(axis=1)), np.sqrt(power.sum(axis=1))
    fundamental = np.abs(pressure[:, 0])
    return Distortion(
        frequency=frozen(f), harmonic_pressure=frozen(pressure), thd=frozen(part_of(harmonics, total)),
        thd_fundamental=frozen(part_of(harmonics, fundamental)), converged=frozen(solved.converged),
        conditions=conditions_of(design, system, f, order, solved), peak_field=frozen(solved.extremes.peak_field),
        least_stress=frozen(solved.extremes.least_stress),
        centre_motion=frozen(solved.motion @ basis.shapes[:, 0]), source_voltage=frozen(np.array(drive)),
        amplitude=design.drive.amplitude)


@lru_cache(maxsize=2)
def _problem(design, fundamentals, n_comp, n_samples, top):
    """Problem of a design, whatever drives it: kept for other amplitudes, laws and listeners."""
    f, order = np.frombuffer(fundamentals), np.arange(n_comp)
    system, basis = basis_for(design, top)
    return harmonic.problem(system, basis, 2*np.pi*f[:, None]*order, 2*np.pi*np.arange(n_samples)[:, None]/n_samples*order)


def waveform(drive, phase):
    """Deviation of the source from the bias, V, at phases of the signal cos(phase): the drive's law."""
    if drive.law == "square-root":
        return np.sqrt(drive.bias**2 + 2*drive.bias*drive.amplitude*np.cos(phase)) - drive.bias
    return drive.amplitude*np.cos(phase)


def components_of(samples, phase, order):
    """Mean and peak amplitudes (n_order,) of a sampled period."""
    wave = np.exp(-1j*np.outer(order, phase))*2/len(phase)
    wave[0] /= 2
    return wave @ samples


def checked(frequency, n_harmonics):
    f = np.atleast_1d(np.asarray(frequency, float))
    if f.ndim != 1 or not 0 < f.size <= MOST_FREQUENCIES or not np.all(np.isfinite(f)) or f.min() < 1 or f.max() > 20e3:
        raise InvalidDesign(f"Distortion is computed at one to {MOST_FREQUENCIES} frequencies between 1 Hz and 20 kHz.")
    if not 2 <= n_harmonics <= MOST_HARMONICS:
        raise InvalidDesign(f"Ask for 2 to {MOST_HARMONICS} harmonics, the fundamental counted as one.")
    return f


def top_of(f):
    """Highest frequency that the basis has to carry well: the band of the page, or the highest fundamental."""
    return float(max(DEFAULT_BAND[1], f.max()))


def part_of(a, b):
    return a/np.where(b > 0, b, 1.0)


def pressure_of(design, system, basis, task, omega, solved):
    """Pressure (n_freq, n_comp-1) at the listener: of the motion, and of the quadratic part of the swept volume."""
    later = omega[:, 1:]
    T, monopole = listening(system, basis, later.ravel(), design.listener)
    linear_part = np.sum(T.reshape(*later.shape, -1)*solved.motion[:, 1:], axis=-1)
    extra = harmonic.components(task, solved.extremes.extra_volume[..., None])[:, 1:, 0]
    return (linear_part + monopole.reshape(later.shape)*extra)*task.audible


def listening(system, basis, omega, listener):
    """Pressure at the listener per unit of each basis vector (n, n_basis) Pa/m, and per unit of volume (n,) Pa/m3."""
    k, d = omega/system.air.sound_speed, listener.distance
    absorbed = 10**(-system.air.absorption(omega/(2*np.pi))*d/20)
    monopole = -omega**2*system.air.density*np.exp(-1j*k*d)/(2*np.pi*d)*absorbed
    return transfer(system, basis, omega/(2*np.pi), d, listener.angle), monopole


def conditions_of(design, system, f, order, solved):
    """Findings of each frequency."""
    limit = design.film.breakdown_field
    reach = system.frequency_max*1.5
    out = []
    for i, frequency in enumerate(f):
        told = []
        where = f"within the cycle at {frequency:.3g} Hz"
        if not solved.converged[i]:
            told.append(Finding("pull-in", f"No periodic motion was found at {frequency:.3g} Hz: the film passes pull-in "
                                "within the cycle, or its motion is not periodic. Lower the amplitude.", "cycle"))
        else:
            stress, field = solved.extremes.least_stress[i], solved.extremes.peak_field[i]
            if stress <= 0:
                told.append(Finding("slack", f"The film goes slack {where}.", "cycle", value=float(stress), limit=0.0))
            if field >= limit:
                told.append(Finding("breakdown", f"The field reaches its breakdown value {where}.", "cycle",
                                    value=float(field), limit=float(limit)))
        if frequency*order[-1] > reach:
            told.append(Finding("resolution", f"Harmonics above {reach/1e3:.3g} kHz are left out at {frequency:.3g} Hz.",
                                "cycle", limit=float(reach)))
        out.append(tuple(told))
    return tuple(out)


def harmonic_levels(found):
    """Level (n_freq, n_harmonics) dB re 20 uPa of each harmonic."""
    return level(found.harmonic_pressure)
