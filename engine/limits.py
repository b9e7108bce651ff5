"""What a design may be driven to: field, stress and stroke under the signal, margins to the walls, breakdown as a chance."""

from dataclasses import dataclass, fields
from typing import ClassVar

import numpy as np

from engine import film as flm
from engine import statics
from engine.checks import checked
from engine.design import Design
from engine.fields import number
from engine.response import Response, response
from engine.statics import Finding, frozen, peak_voltage
from engine.window import VoltageWindow, voltage_window

LINEAR_STROKE = 0.2           # part of the cone's height, beyond which the linear result is not trusted
CHARGE_LIMIT = 45e-6          # C, IEC 61010-1 cl. 6.3, up to 15 kV (from memory)
ENERGY_LIMIT = 0.35           # J, IEC 61010-1 cl. 6.3, above 15 kV (from memory)
HAZARDOUS_VOLTAGE = 60.0      # V d.c., IEC 61010-1 cl. 6.3, normal condition (from memory)


@dataclass(frozen=True)
class Excursion:
    """Largest field, least stress and stroke while the linear response runs at each frequency; SI, read-only."""

    frequency: np.ndarray        # (n_freq,) Hz
    peak_field: np.ndarray       # (n_freq,) V/m
    least_stress: np.ndarray     # (n_freq,) Pa
    stroke: np.ndarray           # (n_freq,) m
    linear: np.ndarray           # (n_freq,) bool: whether the linear result can hold
    largest_amplitude: float     # V, at which somewhere in the band field or stress reaches its limit (linear)
    findings: tuple              # of Finding


@dataclass(frozen=True)
class Margin:
    """How far amplitude and bias may go before one wall, in V; level_db is the mean level at that amplitude."""

    wall: str                    # "slack", "pull-in" or "breakdown"
    voltage: float | None        # of the wall, None: not reached below 20 kV
    largest_amplitude: float | None    # at the design's bias, safety factor included; 0: none
    largest_bias: float | None         # at the design's amplitude
    level_change_db: float | None      # of the level, at the largest amplitude
    level_db: float | None             # mean in the band at the largest amplitude


@dataclass(frozen=True)
class Judgement:
    """What a person judges the walls by; it belongs to the judge, not to the design. InvalidDesign where out of bounds."""

    group: ClassVar[str] = "judgement"
    safety: float = number(1.2, "Safety factor", "", (1.0, 5.0), 0.05, "By how much each wall's voltage is divided "
                           "before the drive is held against it")
    modulus: float = number(20.0, "Weibull modulus", "", (2.0, 100.0), 1.0, "How little breakdown scatters from film to "
                            "film: 5 widely, 50 hardly", scale="log")
    reference_area: float = number(1e-4, "Reference area", "cm²", (1e-7, 1.0), 1e-5, "Area of the films whose breakdown "
                                   "field was measured; 63 % of them fail at it", scale="log")

    def __post_init__(self):
        for field in fields(self):
            object.__setattr__(self, field.name, checked(field, f"{self.group}.{field.name}", getattr(self, field.name)))


@dataclass(frozen=True)
class State:
    """Peak field (V/m), least principal stress (Pa) and stroke (m) in one state; frequency (Hz) of each if dynamic."""

    peak_field: float
    least_stress: float
    stroke: float | None         # None: the film has pulled in
    frequency: tuple | None = None


@dataclass(frozen=True)
class LimitsView:
    """Everything the page of the limits shows of one design."""

    design: Design
    response: Response
    excursion: Excursion
    window: VoltageWindow
    judgement: Judgement
    swing: tuple                 # (lowest, highest) V of the drive
    margins: tuple               # of Margin: slack, pull-in, breakdown
    breakdown_band: tuple        # V at which 5, 50 and 95 % of films have broken down, None: beyond the window
    at_rest: State
    at_peak: State               # of a drive slow against the resonances
    at_worst: State              # of the linear response, each at its own worst frequency
    charge: float                # C, on the film at the peak of the drive
    energy: float                # J
    beyond_limit: bool           # whether charge or energy is above the limit of IEC 61010-1
    worst_power: tuple           # (frequency Hz, apparent VA, dissipated W) where the apparent power is largest


def limits_view(design, found, moving, mean_level_db=None, judgement=Judgement()):
    """LimitsView of a design with its Response, Excursion and mean level. Raises as voltage_window()."""
    window = voltage_window(design)
    charge, energy, beyond = stored(design, found)
    worst = int(np.argmax(found.apparent_power))
    return LimitsView(
        design=design, response=found, excursion=moving, window=window, judgement=judgement,
        swing=(_lowest_voltage(design.drive), peak_voltage(design.drive)),
        margins=margins(design, window, judgement.safety, mean_level_db),
        breakdown_band=breakdown_band(window, judgement.modulus, judgement.reference_area, design.film.breakdown_field),
        **_states(design, found, moving), charge=charge, energy=energy, beyond_limit=beyond,
        worst_power=tuple(float(x[worst]) for x in (found.frequency, found.apparent_power, found.dissipated_power)))


def _lowest_voltage(drive):
    """V, the lowest voltage of the drive; below zero where the signal is larger than the bias."""
    if drive.law == "square-root":
        return float(np.sqrt(max(drive.bias**2 - 2*drive.bias*drive.amplitude, 0.0)))
    return drive.bias - drive.amplitude


def _states(design, found, moving):
    """The three states the film is judged in."""
    rest, solved = found.rest, statics.solve(design)
    top = solved.peak_state
    worst = [int(np.argmax(moving.peak_field)), int(np.argmin(moving.least_stress)), int(np.argmax(moving.stroke))]
    return {
        "at_rest": State(float(rest.field.max()),
                         float(min(rest.stress_meridional.min(), rest.stress_hoop.min())), 0.0),
        "at_peak": State(rest.peak_field, rest.least_stress,
                         None if top is None else float(abs(top[0] - solved.state[0]))),
        "at_worst": State(float(moving.peak_field[worst[0]]), float(moving.least_stress[worst[1]]),
                          float(moving.stroke[worst[2]]), tuple(float(moving.frequency[i]) for i in worst))}


def excursion(design, found: Response):
    """Excursion of a design's response about its rest state, first order in the signal.

    At every node the amplitude of field and principal stress is added to (taken from) its rest value; both are those of
    the linear response, so near a wall they are estimates.
    """
    rest, moved = _per_volt(found.motion)
    motion = np.concatenate([found.motion.unit, found.motion.line], axis=1)*found.amplitude
    size = np.maximum(np.abs(motion).max(axis=1), 1e-300)       # an undamped motion must not overflow single precision
    motion = motion/size[:, None]
    parts = (np.concatenate([motion.real, motion.imag]).astype(np.float32) @ moved).reshape(2, len(motion), 3, -1)
    d_field, d1, d2 = (np.sqrt(np.square(parts[0]) + np.square(parts[1]))*size[:, None, None]).transpose(1, 0, 2)
    field, s1, s2 = rest
    peak_field, least = (field + d_field).max(axis=1), np.minimum(s1 - d1, s2 - d2).min(axis=1)
    limit = design.film.breakdown_field
    linear = (peak_field < limit) & (least > 0) & (found.stroke <= LINEAR_STROKE*abs(found.rest.centre_height))
    return Excursion(
        frequency=found.frequency, peak_field=frozen(peak_field), least_stress=frozen(least), stroke=found.stroke,
        linear=frozen(linear), largest_amplitude=_largest(found.amplitude, ((limit - field, d_field), (s1, d1), (s2, d2))),
        findings=_findings(found, peak_field, least, limit))


def _per_volt(motion):
    """Field and principal stresses at rest (3, n_points), and what moves them: (n_basis + n_line, 3 n_points), float32.

    Row by row the change of field (V/m), first and second principal stress (Pa) per unit of each basis vector (m) and each
    function of the line (V). Single precision carries an amplitude to 1e-6, and halves the time of the largest product.
    """
    system, shapes = motion.system, motion.basis.shapes
    film, V = system.film, system.rest.bias
    e = flm.strain(film, system.state)
    radial, axial = flm.expand(film, shapes)
    lines = np.zeros((motion.line.shape[1], *e.A.shape))
    dA = np.concatenate([2*(e.dr*film.mesh.derivative(radial) + e.dz*film.mesh.derivative(axial)), lines])
    dB = np.concatenate([2*e.r*film.mesh.local(radial)/film.mesh.local_square, lines])
    v = np.zeros_like(dA)
    v[len(shapes):] = system.circuit.functions[:, film.mesh.nodes]
    s1, s2, field = flm.cauchy_stress(film, system.state, V)
    _, wA, wB, wAA, wAB, wBB = flm.surface_energy(film, e.A, e.B, V, electrodes=False)
    c, per_h = film.areal_capacitance*V, 2/film.thickness
    d_field = np.sqrt(e.A*e.B)/film.layer_thickness*v + field*(dA/(2*e.A) + dB/(2*e.B))
    d1 = per_h*(wA*dA + e.A*(wAA*dA + wAB*dB - c*e.B*v))
    d2 = per_h*(wB*dB + e.B*(wAB*dA + wBB*dB - c*e.A*v))
    moved = np.stack([d_field, d1, d2], axis=1).astype(np.float32)
    return np.stack([field, s1, s2]).reshape(3, -1), moved.reshape(len(moved), -1)


def _largest(amplitude, rooms):
    """V at which the first of the rooms (rest distance to a limit, amplitude towards it) is used up; 0 if none is left."""
    ratios = [np.min(room/np.maximum(used.max(axis=0).astype(float), 1e-300)) for room, used in rooms]
    return float(amplitude*max(min(ratios), 0.0)) if amplitude > 0 else 0.0


def _findings(found, peak_field, least, limit):
    """Where in the band the linear result cannot hold, in words."""
    height = abs(found.rest.centre_height)
    told = []
    for name, bad, value, words in (
            ("stroke", found.stroke > LINEAR_STROKE*height, found.stroke,
             f"the centre's stroke is more than {LINEAR_STROKE:.0%} of the cone's height"),
            ("breakdown", peak_field >= limit, peak_field, "the moving film's field reaches its breakdown field"),
            ("slack", least <= 0, -least, "the moving film goes slack")):
        if bad.any():
            worst = int(np.argmax(value))
            told.append(Finding(name, f"The linear result cannot hold near {found.frequency[worst]:.3g} Hz: {words}.",
                                "response", value=float(abs(value[worst])),
                                limit=float(limit) if name == "breakdown" else None))
    return tuple(told)


def margins(design, window, safety=1.2, mean_level_db=None):
    """Margins of a design to the three walls of its VoltageWindow, each voltage divided by the safety factor.

    The peak of the drive, held without inertia, is what may not pass a wall. Returns a tuple of three Margin.
    """
    return tuple(_margin(design.drive, name, voltage, safety, mean_level_db) for name, voltage in (
        ("slack", window.slack_voltage), ("pull-in", window.pull_in_voltage), ("breakdown", window.breakdown_voltage)))


def _margin(drive, name, voltage, safety, mean_level_db):
    if voltage is None:
        return Margin(name, None, None, None, None, None)
    top, V, v = voltage/safety, drive.bias, drive.amplitude
    if drive.law == "square-root":
        amplitude = min(max((top**2 - V**2)/(2*V), 0.0), V/2) if V > 0 else 0.0
        bias = float(np.sqrt(v**2 + top**2) - v)
        bias = bias if v <= bias/2 else None
    else:
        amplitude, bias = max(top - V, 0.0), max(top - v, 0.0)
    change = float(20*np.log10(amplitude/v)) if amplitude > 0 and v > 0 else None
    level = None if change is None or mean_level_db is None else mean_level_db + change
    return Margin(name, voltage, amplitude, bias, change, level)


def breakdown_band(window, modulus=20.0, reference_area=1e-4, breakdown_field=None, chances=(0.05, 0.5, 0.95)):
    """Voltages (n,) at which a film has broken down with the given chances; None where the window does not reach.

    Weibull: chance = 1 - exp(-int (E/E0)^m dA/A0), over the stressed area dA of the deformed film, E0 the field at which
    63 % of films of the reference area A0 have failed.

    Parameters: window; modulus m; reference_area A0 in m2; breakdown_field E0 in V/m; chances.
    Source: Weibull 1951, J. Appl. Mech. 18:293; IEC 62539 (breakdown statistics of solid insulation; from memory).
    """
    steps = np.flatnonzero(window.stable & (window.bias > 0))
    hazard = np.log([np.sum((window.field[i]/breakdown_field)**modulus*window.area[i])/reference_area for i in steps])
    wanted = np.log(-np.log1p(-np.asarray(chances)))
    x = np.log(window.bias[steps])
    out = np.interp(wanted, hazard, x, left=np.nan, right=np.nan)
    # below the first step the field is proportional to the voltage
    below = x[0] + (wanted - hazard[0])/modulus
    out = np.where(wanted < hazard[0], below, out)
    return tuple(float(np.exp(value)) if np.isfinite(value) else None for value in out)


def stored(design, found: Response):
    """(charge C, energy J, whether either limit of IEC 61010-1 is passed) at the peak of the drive, on the film alone."""
    V = peak_voltage(design.drive)
    charge, energy = found.rest.capacitance*V, found.rest.capacitance*V**2/2
    return charge, energy, bool(charge > CHARGE_LIMIT if V <= 15e3 else energy > ENERGY_LIMIT)


def at_margin(design, margin, band):
    """Response of a design with its bias at a margin's largest bias; None where there is none."""
    if not margin.largest_bias:
        return None
    return response(design.with_values({"drive.bias": margin.largest_bias}), band=band)
