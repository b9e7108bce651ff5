"""Small motions about the rest state: modes in air, their kinds and damping."""

from dataclasses import dataclass, replace

import numpy as np
import scipy.linalg

from engine import film as flm
from engine import linear, material, radiation, source
from engine.errors import InvalidDesign, NoRestState
from engine.statics import frozen

MOST_MODES = 160


@dataclass(frozen=True)
class Modes:
    """Modes of circumferential order n, lowest first; shapes are scaled to a largest displacement of 1."""

    order: int
    frequency: np.ndarray            # (n_modes,) Hz, in air unless the air's load is off, rear included
    frequency_vacuum: np.ndarray     # (n_modes,) Hz, same-ranked mode without air and rear
    damping_ratio: np.ndarray        # (n_modes,) film, spring and radiation
    kind: tuple                      # (n_modes,) "pumping", "transverse" or "in-plane"
    reference_radius: np.ndarray     # (n_nodes,) m
    radial: np.ndarray               # (n_modes, n_nodes)
    axial: np.ndarray                # (n_modes, n_nodes)
    modal_mass: np.ndarray           # (n_modes,) kg, the air's share included
    volume_displacement: np.ndarray  # (n_modes,) m2: swept volume per unit of modal amplitude, >= 0
    centre_share: np.ndarray         # (n_modes,) of the structure's kinetic energy, in the centre
    in_plane_share: np.ndarray       # (n_modes,) of the structure's kinetic energy, along the meridian

    @property
    def pumping(self):
        """Index of the pumping mode."""
        return self.kind.index("pumping")

    @property
    def first_break_up(self):
        """Index of the lowest transverse mode above the pumping mode, None if there is none."""
        above = [i for i, kind in enumerate(self.kind) if kind == "transverse" and i > self.pumping]
        return above[0] if above else None


def modes(design, order=0, frequency_max=5000.0):
    """Modes of a design about its biased rest state, in air and in vacuo, up to 1.5 times frequency_max in Hz.

    Raises: NoRestState, NotConverged (see equilibrium); InvalidDesign for an order that is not computed yet.
    """
    if order != 0:
        raise InvalidDesign(f"Modes of circumferential order {order} are not computed yet. Ask for order 0.")
    return solve(linear.build(design, frequency_max)).modes


@dataclass(frozen=True)
class Basis:
    """Modes and static-correction vectors on the free numbers, and the air's tables projected on them."""

    modes: Modes
    shapes: np.ndarray               # (n_modes+n_static, n_dof), modes first, wet-mass-orthogonal
    tables: radiation.Tables
    projected: np.ndarray            # (2, K, n, n): resistance, reactance, see radiation.project_tables
    refined: np.ndarray | None = None    # (n_modes,) Hz: the frequency with the air's mass at that frequency
    flow: np.ndarray | None = None       # (n_points, n) m2: volume flow of each vector through the points of the source


def solve(system, least_modes=1):
    """Basis of a system: the modes in air up to MODES_TO times its highest frequency, and the static corrections.

    Real eigenvectors of (K + K_rear, M + N_s M_air), M_air the low-frequency air mass; then K^-1 [f, s], made
    mass-orthogonal to them. Raises NoRestState where the tangent is not positive definite.
    """
    K = system.stiffness + system.rear.stiffness*np.outer(system.volume, system.volume)
    M = np.diag(system.mass) + linear.air_mass(system)
    top = (2*np.pi*linear.MODES_TO*system.frequency_max)**2
    squares, shapes = scipy.linalg.eigh(K, M, check_finite=False)       # all of them: faster than a choice
    n_modes = min(max(np.searchsorted(squares, top), least_modes), MOST_MODES)
    if squares[0] <= 0:
        raise NoRestState("The rest shape is not stable against small motions: raise the prestretch or lower the bias.",
                          "slack")
    static = _static_corrections(squares, shapes, np.concatenate([system.circuit.loads, system.volume[None]]), n_modes)
    squares, shapes = squares[:n_modes], np.ascontiguousarray(shapes[:, :n_modes].T)
    modes, scale = _describe(system, squares, shapes)
    every = np.concatenate([shapes*scale[:, None], static])
    x_max = 2*np.pi*linear.MODES_TO*system.frequency_max/system.air.sound_speed*system.frame_radius
    tables = radiation.tables(x_max, len(system.projector))
    projected = radiation.project_tables(system.projector @ every.T, tables)
    basis = Basis(modes, every, tables, projected, flow=source.flow(system.source, every).T.copy())
    return _with_damping(system, basis)


def _static_corrections(squares, shapes, loads, n_modes):
    """K^-1 loads, less their part along the first n_modes, orthonormal in M; what is left of nothing is left out.

    All eigenvectors are at hand, orthonormal in M: K^-1 = sum phi phi^T/omega^2, and M is the unit matrix among them.
    """
    kept = []
    for answer in (loads @ shapes)/squares:
        size, v = np.linalg.norm(answer), answer[n_modes:]
        for _ in range(2):
            for other in kept:
                v = v - (v @ other)*other
        left = np.linalg.norm(v)
        if left > 1e-9*size > 0:
            kept.append(v/left)
    return np.array(kept).reshape(len(kept), len(squares) - n_modes) @ shapes[:, n_modes:].T


def _describe(system, squares, shapes):
    """Modes without their damping, and the factor from mass-normalised shapes to those scaled to 1."""
    film = system.film
    radial, axial = flm.expand(film, shapes)
    volume = shapes @ system.volume
    largest = np.sqrt(np.max(radial**2 + axial**2, axis=1))
    scale = np.where(volume < 0, -1.0, 1.0)/largest
    rest = flm.strain(film, system.state)
    along = ((film.mesh.local(radial)*rest.dr + film.mesh.local(axial)*rest.dz)**2/rest.A*film.area).sum(axis=(1, 2))
    kinetic = shapes**2 @ system.mass
    centre_share = film.centre_mass*shapes[:, 0]**2/kinetic
    in_plane_share = film.areal_mass*along/kinetic
    modes = Modes(
        order=0, frequency=frozen(np.sqrt(squares)/(2*np.pi)),
        frequency_vacuum=frozen(_vacuum_frequencies(system, len(squares))),
        damping_ratio=np.zeros(len(squares)), kind=_kinds(centre_share, in_plane_share),
        reference_radius=film.mesh.radius, radial=frozen(radial*scale[:, None]), axial=frozen(axial*scale[:, None]),
        modal_mass=frozen(scale**2), volume_displacement=frozen(volume*scale),
        centre_share=frozen(centre_share), in_plane_share=frozen(in_plane_share))
    return modes, scale


def _vacuum_frequencies(system, n):
    """(n,) Hz of (K, M): banded, the mass is diagonal."""
    root = 1/np.sqrt(system.mass)
    K = system.stiffness*root[:, None]*root
    width = 2*system.film.mesh.order + 2
    band = np.zeros((width, len(K)))
    for i in range(width):
        band[width - 1 - i, i:] = np.diagonal(K, i)
    squares = scipy.linalg.eig_banded(band, eigvals_only=True, check_finite=False)[:n]
    return np.sqrt(np.maximum(squares, 0))/(2*np.pi)


def _kinds(centre_share, in_plane_share):
    """Kinds of the modes; pumping is the one with the largest share of centre energy, if over half."""
    kinds = ["in-plane" if share > 0.5 else "transverse" for share in in_plane_share]
    pumping = int(np.argmax(centre_share))
    if centre_share[pumping] <= 0.5:
        pumping = kinds.index("transverse") if "transverse" in kinds else 0
    kinds[pumping] = "pumping"
    return tuple(kinds)


def _loss(system, omega, shapes):
    """Terms of Im(dynamic stiffness) that are not the air's, on the diagonal: (n_modes,) at a frequency of each."""
    S = material.viscous_modulus(omega, *system.film_losses)
    film = S.imag*np.sum((shapes @ system.dissipation)*shapes, axis=1)
    spring = system.spring_loss*shapes[:, 0]**2
    behind = system.rear.loss_factor*system.rear.stiffness*(shapes @ system.volume)**2
    return film + spring + behind


def _with_damping(system, basis):
    """Basis whose modes carry their damping ratio; two rounds of refinement with the air's mass at each frequency.

    zeta = phi^T Im(dynamic stiffness at omega_m) phi/(2 omega_m^2 phi^T M_wet phi); above 1 the mode is overdamped.
    """
    m, n = basis.modes, len(basis.modes.frequency)
    shapes = basis.shapes[:n]
    resistance, reactance = np.einsum("pkii->pik", basis.projected[:, :, :n, :n]).copy()
    faces = system.rear.faces*system.air_load
    heavy = faces*2*np.pi*system.air.density*system.frame_radius**3
    square0 = (2*np.pi*m.frequency)**2
    structure = shapes**2 @ system.mass
    omega = 2*np.pi*m.frequency
    for _ in range(2):
        x = omega*system.frame_radius/system.air.sound_speed
        at = radiation.interpolation(np.minimum(x, basis.tables.x_max), basis.tables)
        wet = structure + heavy*np.sum(at*reactance, axis=1)
        omega = np.sqrt(square0*m.modal_mass/wet)
    x = np.minimum(omega*system.frame_radius/system.air.sound_speed, basis.tables.x_max)
    at = radiation.interpolation(x, basis.tables)
    radiated = heavy*omega*x*np.sum(at*resistance, axis=1)     # omega N_s Re Z
    damping = (_loss(system, omega, shapes) + omega*radiated)/(2*omega**2*wet)
    return replace(basis, modes=replace(m, damping_ratio=frozen(damping)), refined=frozen(omega/(2*np.pi)))
