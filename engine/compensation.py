"""The periodic drive whose sound has no harmonics up to an order."""

from dataclasses import dataclass

import numpy as np

from engine.distortion import SAMPLES, Distortion, checked, components_of, part_of, solve_drive, top_of, waveform
from engine.statics import frozen

COMPENSATION_ROUNDS, COMPENSATION_STEP = 8, 0.01    # of Newton's method; its differences over the drive's fundamental


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
    f = checked(frequency, n_harmonics)[:1]
    design = design if amplitude is None else design.with_values({"drive.amplitude": float(amplitude)})
    n = max(n_harmonics + 3, 8)
    n_samples = max(SAMPLES, 8*n)
    phase, order = 2*np.pi*np.arange(n_samples)/n_samples, np.arange(n + 1)
    drive = components_of(waveform(design.drive, phase), phase, order)
    for _ in range(COMPENSATION_ROUNDS):
        step, residual = _compensation(design, f, order, phase, drive, n_harmonics)
        if not residual > tolerance:          # reached, or no number
            break
        drive = drive.copy()
        drive[2:n_harmonics + 1] -= step
    found = solve_drive(design, f, order, phase, drive[None], top_of(f))
    p = found.harmonic_pressure[0]
    residual = float(part_of(np.linalg.norm(p[1:n_harmonics]), np.linalg.norm(p)))
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
    found = solve_drive(design, np.repeat(f, len(rows)), order, phase, rows, top_of(f))
    p = found.harmonic_pressure
    if not found.converged.all():
        return np.zeros(k, complex), np.nan
    heard = np.concatenate([p.real[:, 1:n_harmonics], p.imag[:, 1:n_harmonics]], axis=1)
    step = np.linalg.lstsq((heard[1:] - heard[0]).T/small, heard[0], rcond=1e-10)[0]
    return step[:k] + 1j*step[k:], float(part_of(np.linalg.norm(heard[0]), np.linalg.norm(p[0])))
