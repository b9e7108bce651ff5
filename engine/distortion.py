"""Distortion of the driven film: harmonics, intermodulation, and the drive that has none."""

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
COMPENSATION_ROUNDS, COMPENSATION_STEP = 8, 0.01    # of Newton's method; its differences over the drive's fundamental


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
    f = _checked(frequency, n_harmonics)
    design = design if amplitude is None else design.with_values({"drive.amplitude": float(amplitude)})
    n_samples = max(SAMPLES, 8*n_harmonics)
    phase = 2*np.pi*np.arange(n_samples)/n_samples
    order = np.arange(n_harmonics + 1)
    drive = _components(waveform(design.drive, phase), phase, order)
    # the inverses of so many frequencies at a time
    step = max(1, MOST_NUMBERS//(n_harmonics*len(basis_for(design, _top(f))[1].shapes)**2))
    return _joined([_solve(design, part, order, phase, np.broadcast_to(drive, (len(part), len(order))), _top(f), thorough)
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


def _solve(design, f, order, phase, drive, top, thorough=True):
    """Distortion at fundamentals f (n_freq,) for source components drive (n_freq, n_harmonics+1)."""
    system, basis = basis_for(design, top)
    omega = 2*np.pi*f[:, None]*order
    task = _problem(replace(design, name="-", note="", drive=replace(design.drive, amplitude=0.0, law="sine"),
                            listener=Listener()), f.tobytes(), len(order), len(phase), top)
    solved = balance.balance(task, drive, thorough)
    pressure = _pressure(design, system, basis, task, omega, solved)
    power = np.abs(pressure)**2
    harmonics, total = np.sqrt(power[:, 1:].sum(axis=1)), np.sqrt(power.sum(axis=1))
    fundamental = np.abs(pressure[:, 0])
    return Distortion(
        frequency=frozen(f), harmonic_pressure=frozen(pressure), thd=frozen(_ratio(harmonics, total)),
        thd_fundamental=frozen(_ratio(harmonics, fundamental)), converged=frozen(solved.converged),
        conditions=_conditions(design, system, f, order, solved), peak_field=frozen(solved.extremes.peak_field),
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


def _components(samples, phase, order):
    """Mean and peak amplitudes (n_order,) of a sampled period."""
    wave = np.exp(-1j*np.outer(order, phase))*2/len(phase)
    wave[0] /= 2
    return wave @ samples


def _checked(frequency, n_harmonics):
    f = np.atleast_1d(np.asarray(frequency, float))
    if f.ndim != 1 or not 0 < f.size <= MOST_FREQUENCIES or not np.all(np.isfinite(f)) or f.min() < 1 or f.max() > 20e3:
        raise InvalidDesign(f"Distortion is computed at one to {MOST_FREQUENCIES} frequencies between 1 Hz and 20 kHz.")
    if not 2 <= n_harmonics <= MOST_HARMONICS:
        raise InvalidDesign(f"Ask for 2 to {MOST_HARMONICS} harmonics, the fundamental counted as one.")
    return f


def _top(f):
    """Highest frequency that the basis has to carry well: the band of the page, or the highest fundamental."""
    return float(max(DEFAULT_BAND[1], f.max()))


def _ratio(a, b):
    return a/np.where(b > 0, b, 1.0)


def _pressure(design, system, basis, task, omega, solved):
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


def _conditions(design, system, f, order, solved):
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


@dataclass(frozen=True)
class CompensatedDrive:
    """A periodic drive whose sound has no harmonics up to an order."""

    frequency: float
    source_voltage: np.ndarray       # (n_harmonics+1,) complex V, the mean deviation from the bias first
    peak_voltage: float              # V, bias included
    residual: float                  # harmonics left, over the total
    achieved: bool
    finding: str                     # empty, or why it cannot be done
    distortion: Distortion           # of the compensated drive


def compensated_drive(design, frequency, amplitude=None, n_harmonics=5, tolerance=1e-4):
    """The periodic drive near the design's law whose pressure has no harmonic 2 ... n_harmonics.

    Newton's method on the drive's harmonics, with differences of the full balance: at a resonance one harmonic of the drive
    moves all those of the sound.
    Returns: CompensatedDrive; achieved is False, with the reason, where it does not settle or needs more than 20 kV.
    """
    f = _checked(frequency, n_harmonics)[:1]
    design = design if amplitude is None else design.with_values({"drive.amplitude": float(amplitude)})
    n = max(n_harmonics + 3, 8)
    n_samples = max(SAMPLES, 8*n)
    phase, order = 2*np.pi*np.arange(n_samples)/n_samples, np.arange(n + 1)
    drive = _components(waveform(design.drive, phase), phase, order)
    for _ in range(COMPENSATION_ROUNDS):
        step, residual = _compensation(design, f, order, phase, drive, n_harmonics)
        if not residual > tolerance:          # reached, or no number
            break
        drive = drive.copy()
        drive[2:n_harmonics + 1] -= step
    found = _solve(design, f, order, phase, drive[None], _top(f))
    p = found.harmonic_pressure[0]
    residual = float(_ratio(np.linalg.norm(p[1:n_harmonics]), np.linalg.norm(p)))
    top = float(np.max(np.abs(design.drive.bias + np.real(np.exp(1j*np.outer(phase, order)) @ drive))))
    why = ""
    if not found.converged[0] or residual > 10*tolerance:
        why = "No drive was found that silences the harmonics: lower the amplitude."
    elif top > 20e3:
        why = f"It would take {top/1e3:.3g} kV, more than 20 kV."
    return CompensatedDrive(float(f[0]), frozen(drive.copy()), top, residual, not why, why, found)


def _compensation(design, f, order, phase, drive, n_harmonics):
    """(Newton step (n_harmonics-1,) V of the drive's harmonics from the second on, harmonics heard over the total)."""
    k, small = n_harmonics - 1, COMPENSATION_STEP*max(abs(drive[1]), 1e-9)
    rows = np.repeat(drive[None], 2*k + 1, axis=0)
    each = np.arange(k)
    rows[1 + each, 2 + each] += small
    rows[1 + k + each, 2 + each] += 1j*small
    found = _solve(design, np.repeat(f, len(rows)), order, phase, rows, _top(f))
    p = found.harmonic_pressure
    if not found.converged.all():
        return np.zeros(k, complex), np.nan
    heard = np.concatenate([p.real[:, 1:n_harmonics], p.imag[:, 1:n_harmonics]], axis=1)
    step = np.linalg.lstsq((heard[1:] - heard[0]).T/small, heard[0], rcond=1e-10)[0]
    return step[:k] + 1j*step[k:], float(_ratio(np.linalg.norm(heard[0]), np.linalg.norm(p[0])))


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
    _checked([f1, f2], 8)
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
    system, basis = basis_for(design, _top(frequency))
    omega = 2*np.pi*frequency[None]
    task = harmonic.problem(system, basis, omega, theta)
    drive = harmonic.components(task, signal[None, :, None])[..., 0]
    solved = balance.balance(task, drive)
    pressure = _pressure(design, system, basis, task, omega, solved)[0]
    at = {tuple(o): abs(p) for o, p in zip(order[1:], pressure, strict=True)}
    tone = at[0, 1]
    both = at[1, 0] + at[0, 1]
    return Intermodulation(
        order=frozen(order[1:]), frequency=frozen(frequency[1:]), pressure=frozen(pressure),
        modulation_2=float(_ratio(at.get((-1, 1), 0) + at.get((1, 1), 0), tone)),
        modulation_3=float(_ratio(at.get((-2, 1), 0) + at.get((2, 1), 0), tone)),
        difference_2=float(_ratio(at.get((-1, 1), 0), both)),
        difference_3=float(_ratio(at.get((2, -1), 0) + at.get((-1, 2), 0), both)),
        converged=bool(solved.converged[0]), conditions=_conditions(design, system, frequency[1:2], np.ones(1), solved)[0])


def harmonic_levels(found):
    """Level (n_freq, n_harmonics) dB re 20 uPa of each harmonic."""
    return level(found.harmonic_pressure)
