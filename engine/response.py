"""From the drive to the sound: motion of every mode, its pressure at the listener, and the sum."""

from dataclasses import dataclass, replace
from functools import lru_cache

import numpy as np

from engine import film as flm
from engine import linear, radiation, statics
from engine.design import Listener
from engine.errors import InvalidDesign
from engine.modes import MOST_MODES, Modes
from engine.modes import solve as solve_modes
from engine.motion import Motion, reduce, solve_motion
from engine.resonances import frequency_grid
from engine.statics import Equilibrium, Finding, frozen

REFERENCE_PRESSURE = 20e-6      # Pa, ISO 1683
DEFAULT_BAND = (20.0, 5000.0)   # Hz
FREQUENCY_RANGE = (0.1, 40e3)   # Hz
MOST_FREQUENCIES = 20000


@dataclass(frozen=True)
class Response:
    """Linear response to the drive's amplitude; frequency is the leading axis, amplitudes are peak, e^{+i omega t}."""

    frequency: np.ndarray      # (n_freq,) Hz
    pressure: np.ndarray       # (n_freq,) complex Pa at the listener
    contribution: np.ndarray   # (n_freq, n_modes+1) complex Pa, of the modes in air, the residual last; sums to pressure
    stroke: np.ndarray         # (n_freq,) m, of the centre
    displacement: np.ndarray   # (n_freq, n_modes) complex m, of each mode's largest point
    signed_share: np.ndarray   # (n_freq, n_modes+1) Re(contribution conj(pressure)) / (|pressure| sum |contribution|)
    survival: np.ndarray       # (n_freq,) |pressure| / sum |contribution|
    level_db: np.ndarray       # (n_freq,) dB re 20 uPa
    impedance: np.ndarray      # (n_freq,) complex ohm, source to film, the motion's part included
    current: np.ndarray        # (n_freq,) complex A, out of the source, were it not limited
    electrode_voltage: np.ndarray   # (n_freq,) complex V on the film at its inner edge
    apparent_power: np.ndarray      # (n_freq,) VA
    dissipated_power: np.ndarray    # (n_freq,) W, out of the source
    limited_level_db: np.ndarray    # (n_freq,) dB, with the drive turned down where the current limit asks for it
    charging_corner: float | None   # Hz: from there less than 1/sqrt 2 of the voltage reaches the inner edge
    current_limited_above: float | None   # Hz, lowest frequency at which the current limit is reached
    sound_power: np.ndarray    # (n_freq,) W, to the listener's side
    modes: Modes
    rest: Equilibrium
    estimate_above: float      # Hz: above it the cone's depth makes the level an estimate (inf: nowhere)
    findings: tuple            # of Finding
    motion: Motion             # what directivity and later questions need
    amplitude: float           # V

    def directivity(self, angles):
        """Pressure (n_freq, n_angles) complex Pa at the listener's distance, at polar angles (n_angles,) in radians."""
        distance = self.listener_distance
        q = self.motion.unit*self.amplitude
        return np.stack([np.sum(_transfer(self.motion, distance, angle)*q, axis=1) for angle in np.atleast_1d(angles)],
                        axis=1)

    listener_distance: float = 1.0    # m


def response(design, frequency=None, band=DEFAULT_BAND):
    """Linear response of a design about its biased rest state, at the drive's amplitude.

    Parameters
    ----------
    design : Design
    frequency : (n_freq,) Hz, ascending; None: a log grid over the band, refined around the resonances.
    band : (low, high) Hz, used where frequency is None.

    Returns: Response.
    Raises: NoRestState, NotConverged (see equilibrium); InvalidDesign for frequencies that cannot be computed.
    """
    asked = _band_key(band) if frequency is None else _frequency_key(frequency)
    motion = _motion(_mechanical(design), asked)
    rest = statics.solve(design)
    n_modes = len(motion.basis.modes.frequency)
    q = motion.unit*design.drive.amplitude
    listener = design.listener
    _check_listener(motion.system, listener)
    p = _transfer(motion, listener.distance, listener.angle)*q
    contribution = np.concatenate([p[:, :n_modes], p[:, n_modes:].sum(axis=1, keepdims=True)], axis=1)
    pressure = p.sum(axis=1)
    share, survival = _shares(contribution, pressure)
    equilibrium = statics.judge(design, rest, motion.system.film, motion.system.state)
    electrical = _electrical(design, motion, pressure)
    return Response(
        frequency=motion.frequency, pressure=frozen(pressure), contribution=frozen(contribution),
        stroke=frozen(np.abs(q @ motion.basis.shapes[:, 0])), displacement=frozen(q[:, :n_modes]),
        signed_share=frozen(share), survival=frozen(survival), level_db=frozen(level(pressure)),
        **electrical, sound_power=frozen(motion.power*design.drive.amplitude**2),
        modes=motion.basis.modes, rest=equilibrium, estimate_above=estimate_above(motion.system, equilibrium),
        findings=equilibrium.conditions + _limits(motion) + _starved(electrical), motion=motion,
        amplitude=design.drive.amplitude, listener_distance=listener.distance)


def _electrical(design, motion, pressure):
    """The electrical fields of a response."""
    v, limit = design.drive.amplitude, design.drive.current_limit
    omega = 2*np.pi*motion.frequency
    admittance = 1j*omega*motion.charge
    current = admittance*v
    reached = motion.line @ motion.system.circuit.inner
    held = np.ones_like(omega)
    if limit is not None:
        held = np.minimum(1.0, limit/np.maximum(np.abs(current), 1e-300))
    starved, limited = np.abs(reached) < np.sqrt(0.5), held < 1
    return dict(
        impedance=frozen(1/admittance), current=frozen(current), electrode_voltage=frozen(reached*v),
        apparent_power=frozen(v*np.abs(current)/2), dissipated_power=frozen(v*current.real/2),
        limited_level_db=frozen(level(pressure*held)),
        charging_corner=float(motion.frequency[np.argmax(starved)]) if starved.any() else None,
        current_limited_above=float(motion.frequency[np.argmax(limited)]) if limited.any() else None)


def _starved(electrical):
    """Findings about a source and electrodes that do not bring the voltage to the film."""
    corner, limited = electrical["charging_corner"], electrical["current_limited_above"]
    told = []
    if corner is not None:
        told.append(Finding("charging", f"From {corner:.3g} Hz less than 71 % of the voltage reaches the electrodes' inner "
                            "edge: lower the sheet or source resistance.", "response", value=corner))
    if limited is not None:
        told.append(Finding("current", f"From {limited:.3g} Hz the film asks for more current than the source's limit.",
                            "response", value=limited))
    return tuple(told)


def level(pressure):
    """dB re 20 uPa of a peak amplitude; silence is put at -400 dB."""
    return 20*np.log10(np.maximum(np.abs(pressure)/np.sqrt(2)/REFERENCE_PRESSURE, 1e-20))


def _shares(contribution, pressure):
    """Signed share of each contribution and survival; 0 where nothing moves."""
    total, made = np.abs(pressure), np.abs(contribution).sum(axis=1)
    direction = np.conj(pressure)/np.where(total > 0, total, 1.0)
    made = np.where(made > 0, made, 1.0)
    return (contribution*direction[:, None]).real/made[:, None], total/made


def estimate_above(system, equilibrium):
    """Hz from which the cone's depth, left out by the flat source, moves the level by more than 0.5 dB."""
    kb = radiation.depth_estimate_limit(abs(equilibrium.centre_height)/system.frame_radius)
    return float(kb*system.air.sound_speed/(2*np.pi*system.frame_radius))


def _limits(motion):
    """Findings about what the basis and the mesh can hold."""
    modes, top = motion.basis.modes, motion.system.frequency_max
    reach = motion.system.unresolved_above
    if len(modes.frequency) >= MOST_MODES:
        reach = min(reach, modes.frequency[-1]/linear.MODES_TO)
    if reach >= top:
        return ()
    return (Finding("resolution", f"So many modes lie below {top/1e3:.3g} kHz that the result holds only up to "
                    f"{reach:.3g} Hz.", "response", value=top, limit=float(reach)),)


def _mechanical(design):
    """The design without what only scales or listens: key of everything computed per volt."""
    return replace(design, name="-", note="", drive=replace(design.drive, amplitude=0.0, law="sine"),
                   listener=Listener())


def _band_key(band):
    low, high = (float(f) for f in band)
    if not FREQUENCY_RANGE[0] <= low < high <= FREQUENCY_RANGE[1]:
        raise InvalidDesign(f"The band {low:g} Hz to {high:g} Hz cannot be computed: give two ascending frequencies "
                            f"between {FREQUENCY_RANGE[0]:g} Hz and {FREQUENCY_RANGE[1]:g} Hz.")
    return low, high


def _frequency_key(frequency):
    f = np.atleast_1d(np.asarray(frequency, float))
    good = (f.ndim == 1 and 0 < f.size <= MOST_FREQUENCIES and np.all(np.isfinite(f)) and np.all(np.diff(f) > 0)
            and f[0] >= FREQUENCY_RANGE[0] and f[-1] <= FREQUENCY_RANGE[1])
    if not good:
        raise InvalidDesign(f"These frequencies cannot be computed: give one to {MOST_FREQUENCIES} ascending numbers "
                            f"between {FREQUENCY_RANGE[0]:g} Hz and {FREQUENCY_RANGE[1]:g} Hz.")
    return f.tobytes()


@lru_cache(maxsize=6)
def _system_and_basis(design, frequency_max):
    system = linear.build(design, frequency_max)
    return system, solve_modes(system)


def prepare():
    """Build the air's tables that ordinary designs need, so that the first response finds them; for a thread."""
    for x_max, n in ((8.0, 64), (4.0, 48), (16.0, 112), (8.0, 80), (16.0, 96), (16.0, 80), (4.0, 64)):
        radiation.prepare(x_max, n)


def basis_for(design, frequency_max):
    """(system, basis) of a design for frequencies up to frequency_max in Hz; kept for the last few designs."""
    return _system_and_basis(_mechanical(design), float(frequency_max))


@lru_cache(maxsize=4)
def _motion(design, asked):
    given = np.frombuffer(asked) if isinstance(asked, bytes) else None
    system, basis = _system_and_basis(design, asked[1] if given is None else float(given[-1]))
    reduced = reduce(system, basis)
    frequency = frequency_grid(system, basis, reduced, *asked) if given is None else given
    return solve_motion(system, basis, frequency, reduced)


def _check_listener(system, listener):
    """Raise InvalidDesign where the listener is on or behind the film."""
    across, along = listener.distance*np.sin(listener.angle), listener.distance*np.cos(listener.angle)
    radius, height = (np.append(start, v) for start, v in zip(
        ([0.0], [system.state[0]]), flm.expand(system.film, system.state, at_rest=True), strict=True))
    surface = np.interp(across, radius, np.maximum(height, 0.0), right=0.0)
    room = 2e-3*system.frame_radius
    if along < surface + room and across < system.frame_radius + room:
        raise InvalidDesign(
            f"The listener (listener.distance), {listener.distance*1e3:.3g} mm from the middle of the frame plane, is on "
            f"or behind the film, which stands {surface*1e3:.3g} mm high there. Move the listener further away.",
            "listener.distance", listener.distance)


def _transfer(motion, distance, angle):
    return transfer(motion.system, motion.basis, motion.frequency, distance, angle)


def transfer(system, basis, frequency, distance, angle):
    """(n_freq, n_basis) Pa/m: pressure at a point per unit of each basis vector, the air's absorption included."""
    T = radiation.listener_transfer(system.source.radius, system.source.height, basis.flow,
                                    2*np.pi*frequency/system.air.sound_speed, distance, angle,
                                    system.air.density, system.air.sound_speed)
    return T*10**(-system.air.absorption(frequency)*distance/20)[:, None]
