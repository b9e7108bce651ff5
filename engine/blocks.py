"""Motion and sound of a clip in overlapping blocks, by the fixed point of harmonic balance on samples.

A motion is y = linear answer to the source + g * r, g the impulse response of the linear part and r what of the film's
force and charge is not linear. A block is context, chunk and look ahead: g * r of the context and the linear answer come
from one transform at every bin of the block. The chunk is marched in windows, for which g is tabulated separately: in a
window, whose samples depend on one another, y and r are iterated, with a short look ahead, since a constant loss
factor makes g reach a little into the future.
"""

from dataclasses import dataclass

import numpy as np
import scipy.fft

from engine import cycle, harmonic, inverses
from engine.errors import NotConverged

TABLE_BYTES = 240e6      # of the inverses
LONGEST = 1.0            # s, of a block
WINDOW, GUARD = 384, 32          # samples
WINDOWS = 6              # of a chunk
NEAR_BINS = 0.86         # of a window's: the basis ends at 0.8 of them
TAPER = 600              # samples over which a block begins and ends
TOLERANCE = 3e-6         # error of the motion, judged by the rounds' changes, in the norm of the elastic energy
QUIET = 1e-4             # of the loudest window: tolerances are not asked to be finer
ROUNDS = 40
MEMORY = 5
PIECE = 64               # samples that the film's force is evaluated on together


@dataclass(frozen=True)
class Table:
    """The linear part at every bin of a block, and its impulse response between windows."""

    task: harmonic.Problem       # one row, whose components are the bins up to the basis's top
    rate: float                  # Hz
    n_samples: int               # of a block
    omega: np.ndarray            # (n_bins,) rad/s, all of the transform's
    above: np.ndarray            # (n_bins - n_comp, n_line): line voltages per volt of source above the basis's top
    near: np.ndarray             # (WINDOWS, n, size, size) complex64: spectra of g, windows apart
    norm: np.ndarray             # (size,): square roots of stiffness, 0 for the line
    still: float                 # in that norm, a window's motion that is none: of a millivolt

    @property
    def n_new(self):
        """Samples of a chunk."""
        return WINDOW*WINDOWS

    @property
    def n_context(self):
        return int(0.85*(self.n_samples - self.n_new - GUARD))

    @property
    def columns(self):
        """Places in a state (basis, line functions) of what the linear part answers."""
        n = len(self.task.static)
        return np.concatenate([np.arange(n), n + self.task.free])


def table(system, basis, top, rate):
    """Table of a system for blocks at a rate in Hz, the basis reaching top in Hz; the shorter the larger the basis."""
    n_line = len(system.circuit.inner)
    size = len(basis.shapes) + n_line - (system.circuit.source_resistance == 0)
    bins = min(LONGEST*top, TABLE_BYTES/(8*size**2))
    n = 2*scipy.fft.next_fast_len(max(int(bins*rate/top), 3*WINDOW*WINDOWS)//2, real=True)
    omega = 2*np.pi*rate*np.arange(n//2 + 1)/n
    n_comp = int(np.searchsorted(omega, 2*np.pi*top, side="right"))
    task = harmonic.problem(system, basis, omega[None, :n_comp], np.zeros((1, n_comp)))
    stiffness = np.abs(np.diagonal(task.model.tangent))
    norm = np.sqrt(np.concatenate([stiffness, np.zeros(len(task.free))]))     # the line follows the motion
    volt = np.linalg.norm((task.static @ task.model.loads[0])*norm[:len(stiffness)])*np.sqrt(WINDOW + GUARD)
    return Table(task, rate, n, omega, _above(system.circuit, task.free, omega[n_comp:]), _near(task, n), norm, 1e-3*volt)


def _near(task, n_samples):
    """(WINDOWS, bins, size, size): spectra of the impulse response from a window to itself and to those after it."""
    reach, size, n_basis = WINDOW + GUARD, task.inverse.shape[-1], len(task.static)
    lags = np.arange(WINDOWS)[:, None]*WINDOW + np.arange(1 - reach, reach)
    out = np.empty((WINDOWS, int(NEAR_BINS*(reach + 1)), size, size), np.complex64)
    n_bins = out.shape[1]
    for i in range(size):           # the linear part is symmetric
        spectrum = np.zeros((size - i, task.inverse.shape[1] + 1), np.complex64)
        spectrum[:, 1:] = task.inverse[0, :, i, i:].T
        if i < n_basis:
            spectrum[:n_basis - i, 0] = task.static[i, i:]
        wrapped = np.zeros((size - i, WINDOWS, 2*reach), np.float32)
        wrapped[:, :, np.arange(1 - reach, reach)] = scipy.fft.irfft(spectrum, n_samples)[:, lags]
        out[:, :, i, i:] = scipy.fft.rfft(wrapped)[:, :, :n_bins].transpose(1, 2, 0)
        out[:, :, i, :i] = 0
    for apart in out:
        apart += np.triu(apart, 1).transpose(0, 2, 1)
    return out


def _above(circuit, free, omega):
    """(n, n_line) line voltages per volt of source where the film does not move."""
    out = np.zeros((len(omega), len(circuit.inner)), complex)
    out[:, 0] = 1.0
    if len(free):
        right = np.zeros((len(omega), len(free)), complex)
        if circuit.source_resistance > 0:
            right[:, 0] = -1/(1j*omega*circuit.source_resistance)
        else:
            right += circuit.capacitance[free, 0]
        out[:, free] = np.linalg.solve(inverses.line_part(circuit, omega, free), right[..., None])[..., 0]
    return out


def answer(made, voltage, r):
    """State components (n_comp, n_basis + n_line) of the linear part in a block of source voltages and remainders.

    voltage (n_samples,) V; r (n_samples, size): less the nonlinear part of the force, and that of the charge.
    """
    n_comp, row = made.task.theta.shape[1], np.arange(1)
    d = scipy.fft.rfft(voltage*_taper(made.n_samples))[None, :n_comp]
    right = harmonic.unmoved(made.task, d, row)
    if r.any():
        right += _forward(r*_taper(made.n_samples)[:, None].astype(np.float32))[:n_comp]
    return harmonic.answer(made.task, d, right, row)[0]


def _forward(part, n=None):
    """(bins, m) spectra of samples (n_samples, m), padded to n: each in one row of memory, which is faster."""
    return scipy.fft.rfft(np.ascontiguousarray(part.T), n).T


def _backward(spectra, n):
    """(n, m) samples of spectra (bins, m)."""
    return scipy.fft.irfft(np.ascontiguousarray(spectra.T), n).T


def _taper(n):
    fade = np.sin(np.pi/2*(np.arange(TAPER) + 0.5)/TAPER)**2
    return np.concatenate([fade, np.ones(n - 2*TAPER), fade[::-1]])


def samples(made, state, voltage):
    """State (n_new + GUARD, n_basis + n_line) of a chunk from a block's components and source voltages."""
    part = slice(made.n_context, made.n_context + made.n_new + GUARD)
    n_basis = len(made.task.static)
    volts = scipy.fft.rfft(voltage)[len(state):, None]*made.above
    whole = np.concatenate([state, np.concatenate([np.zeros((len(volts), n_basis)), volts], axis=1)])
    y = _backward(whole.astype(np.complex64), made.n_samples)[part].astype(float)
    if not made.task.source.any():
        y[:, n_basis] = voltage[part]           # sample by sample, not of the band alone
    return y


def pressure(made, transfer, monopole, state, volume):
    """(n_new,) Pa: sound of the chunk before a block's own, which ends its context; volume (n_samples,) m3."""
    n_comp = len(state)
    heard = np.zeros(len(made.omega), complex)
    heard[:n_comp] = np.sum(transfer*state[:, :transfer.shape[1]], axis=1)
    if volume.any():
        heard[:n_comp] += monopole*scipy.fft.rfft(volume*_taper(len(volume)))[:n_comp]
    return scipy.fft.irfft(heard, made.n_samples)[made.n_context - made.n_new:made.n_context]


class March:
    """What a clip's motion carries from window to window."""

    def __init__(self, made):
        self.made, self.loudest = made, 0.0
        self.r = np.zeros((made.n_samples, made.task.inverse.shape[-1]), np.float32)
        self.volume = np.zeros(made.n_samples)

    def chunk(self, base, halted):
        """States (n_new, n_basis + n_line) of a chunk, from its base (n_new + GUARD, n_basis + n_line): what its states
        would be if r were as it stands. Raises NotConverged.
        """
        made, start, reach = self.made, self.made.n_context, WINDOW + GUARD
        guess = self.r[start:start + made.n_new + GUARD].copy()
        r, done, states = guess.copy(), [], []
        for w in range(WINDOWS):
            halted()
            part = slice(w*WINDOW, w*WINDOW + reach)
            y0 = base[part].copy()
            if done:
                before = sum((made.near[w - k] @ spectrum for k, spectrum in enumerate(done)))
                y0[:, made.columns] += self._samples(before)
            y, r[part] = self._window(y0, guess[part])
            states.append(y[:WINDOW])
            done.append(self._spectrum((r[part] - guess[part])[:WINDOW]))
            motion = np.ascontiguousarray(y[:, :len(made.task.static)])
            self.volume[start + w*WINDOW:][:reach] = cycle.extra_volume(made.task.model, motion)
        self.r[start:start + len(r)] = r
        return np.concatenate(states)

    def advance(self):
        """Go on to the next chunk."""
        n = self.made.n_new
        for name in ("r", "volume"):
            old = getattr(self, name)
            new = np.concatenate([old[n:], np.zeros_like(old[:n])])
            ahead = new[self.made.n_context:]
            fade = np.cos(np.pi/2*np.arange(GUARD)/GUARD)**2
            ahead[:GUARD] = (ahead[:GUARD].T*fade).T
            ahead[GUARD:] = 0
            setattr(self, name, new)

    def _spectrum(self, r):
        return _forward(r.astype(np.float32), 2*(WINDOW + GUARD))[:self.made.near.shape[1], :, None]

    def _samples(self, spectra):
        reach = WINDOW + GUARD
        return _backward(spectra[..., 0], 2*reach)[:reach]

    def _window(self, y0, guess):
        """(state, remainder) of a window from what is known of its state and of the remainder in it."""
        made = self.made
        y, past, before = y0, [], 0.0
        with np.errstate(all="ignore"):
            for _ in range(ROUNDS):
                r = remainder(made.task, y)
                new = y0.copy()
                new[:, made.columns] += self._samples(made.near[0] @ self._spectrum(r - guess))
                step = ((new - y)[:, made.columns]*made.norm).ravel()
                change, size = np.linalg.norm(step), np.linalg.norm(new[:, made.columns]*made.norm)
                if not np.isfinite(change):
                    break
                # the error that is left shrinks with every round by about as much as the changes did
                left = change*min(1.0, 3*change/max(before, 1e-300))
                before = change
                if left <= TOLERANCE*max(size, QUIET*self.loudest, made.still):
                    self.loudest = max(size, self.loudest)
                    return new, r
                past = [*past, (step, new)][-MEMORY - 1:]
                y = _least(past)
        raise NotConverged("the motion in a window")


def _least(past):
    """The combination, of weights that sum to 1, of past answers whose steps, so combined, are the least."""
    last, new = past[-1]
    if len(past) == 1:
        return new
    turned = np.array([last - step for step, _ in past[:-1]])
    scale = np.linalg.norm(turned, axis=1)
    turned /= np.maximum(scale, 1e-300)[:, None]
    share = np.linalg.solve(turned @ turned.T + 1e-10*np.eye(len(turned)), turned @ last)/np.maximum(scale, 1e-300)
    return new - sum(s*(new - other) for s, (_, other) in zip(share, past[:-1], strict=True))


def remainder(task, y):
    """(n, size): less the nonlinear part of the film's force, and that of the free line functions' charge, at states y."""
    model, n_basis, charged = task.model, len(task.static), len(task.free) > 0
    motion, line = y[:, :n_basis], y[:, n_basis:]
    force, charge = (None if part is None else part.reshape(-1, part.shape[-1])[:len(y)] for part in
                     cycle.force_and_charge(model, _pieces(motion), _pieces(line), None, None, charged))
    r = motion @ model.tangent - line @ model.loads + model.constant - force
    if charged:
        charge = charge - model.rest_charge - (motion @ model.loads.T + line @ model.capacitance)
        r = np.concatenate([r, charge[:, task.free]], axis=1)
    return r


def _pieces(part):
    """(n, PIECE, m) of samples (n_samples, m), filled up with zeros."""
    short = -len(part) % PIECE
    return np.concatenate([part, np.zeros((short, part.shape[1]))]).reshape(-1, PIECE, part.shape[1])
