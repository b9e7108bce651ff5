"""The linear system about a rest state: every matrix of the dynamic stiffness, on a mesh fine enough for a frequency.

[K + S(omega) D0 + i eta_s k_s e_c e_c^T + (1 + i eta_r) K_rear + i omega N_s Z(omega) - omega^2 M] q = f v
"""

from dataclasses import dataclass

import numpy as np

from engine import air, circuit, mesh, radiation, rear, source, statics
from engine import film as flm

DYNAMIC_ORDER = 10
NODES_PER_WAVELENGTH = 3.3  # of the shortest wave of the basis; DEVELOPERS.md has the convergence
LOWEST_FREQUENCY = 10.0     # Hz, from which the electrodes' expansion holds
MODES_TO = 1.5              # the basis holds the modes up to this multiple of the highest frequency asked
POLYNOMIALS_TO = 1.3        # the air's polynomials are counted at this multiple of it
MOST_ELEMENTS = 26
MOST_POLYNOMIALS = 192
LISTENER_POINTS = 12        # Gauss points an element for the sound at the listener: 1e-13 of it


@dataclass(frozen=True)
class System:
    """Matrices over the free numbers (n_dof) of the film; the air's load through Zernike coefficients, see radiation."""

    film: flm.Film
    state: np.ndarray
    rest: statics.Rest
    stiffness: np.ndarray        # K (n_dof, n_dof)
    mass: np.ndarray             # diagonal of M (n_dof,)
    dissipation: np.ndarray      # D0 (n_dof, n_dof)
    circuit: circuit.Circuit     # electrodes and source; its loads are f (n_line, n_dof) N/V at the bias
    volume: np.ndarray           # s (n_dof,) m2
    source: source.Source        # what the listener hears
    projector: np.ndarray        # (n_polynomials, n_dof): Zernike coefficients of the normal velocity
    air: air.Air
    rear: rear.Rear
    air_load: bool
    film_losses: tuple           # what material.viscous_modulus takes after omega
    spring_loss: float           # eta_s k_s, N/m
    frame_radius: float
    frequency_max: float         # Hz, highest asked
    unresolved_above: float      # Hz, where the mesh stops short of what was asked; inf: nowhere


def wavenumber(film, q, voltage, omega, air_density, faces):
    """(n_nodes,) rad/m of the reference radius: transverse waves on the film with the air they carry.

    k^2 2 w_A = omega^2 (m + N rho/k); the tension is floored at a fiftieth of its largest value, where the film is slack.
    """
    e = flm.strain(film, q)
    tension = np.empty(film.mesh.n_nodes)
    tension[film.mesh.nodes] = 2*flm.surface_energy(film, e.A, e.B, voltage)[1]
    tension = np.maximum(tension, 0.02*np.max(np.abs(tension)))
    k = omega*np.sqrt(film.areal_mass/tension)
    for _ in range(4):
        k = omega*np.sqrt((film.areal_mass + faces*air_density/k)/tension)
    return k


def build(design, frequency_max, refinement=1.0):
    """System of a design for frequencies up to frequency_max in Hz; refinement multiplies the number of elements."""
    rest = statics.solve(design)
    gas = air.properties(design.air.temperature, design.air.pressure, design.air.relative_humidity)
    behind = rear.from_design(design, gas)
    f = design.film
    a, b = design.geometry.centre_radius, design.geometry.frame_radius
    omega = 2*np.pi*MODES_TO*frequency_max
    r0 = rest.film.mesh.radius
    k = wavenumber(rest.film, rest.state, rest.bias, omega, gas.density, behind.faces*design.air.load)
    density = refinement*(k*NODES_PER_WAVELENGTH/(2*np.pi*DYNAMIC_ORDER) + 1/(b - a) + 1/(r0*np.log(b/a)))
    wanted = int(np.ceil(np.sum(np.diff(r0)*(density[1:] + density[:-1])/2)))
    most = int(MOST_ELEMENTS*refinement)
    n_elements = min(wanted, most)
    fine, q = statics.on_mesh(rest, mesh.build(mesh.equidistributed(density, r0, n_elements), DYNAMIC_ORDER))

    n_polynomials = min(radiation.n_polynomials(refinement*POLYNOMIALS_TO*np.max(k)/MODES_TO, b),
                        int(refinement*MOST_POLYNOMIALS))
    emitter = source.sample(fine, q, int(radiation.points_per_segment(_widest(fine, q), n_polynomials)))
    functionals = radiation.projection_matrix(emitter.radius/b, n_polynomials)/(2*np.pi*b**2)
    _, s = flm.swept_volume(fine, q)
    return System(
        film=fine, state=q, rest=rest, stiffness=flm.linearise(fine, q, rest.bias)[2], mass=fine.mass,
        dissipation=flm.dissipation(fine, q), volume=s,
        circuit=circuit.build(fine, q, rest.bias, design.electrodes, design.drive, f.layers,
                              (LOWEST_FREQUENCY, frequency_max)),
        source=source.sample(fine, q, LISTENER_POINTS),
        projector=source.flow_projection(emitter, functionals), air=gas, rear=behind, air_load=design.air.load,
        film_losses=(f.shear_modulus, f.loss_factor, f.viscosity, f.relaxation),
        spring_loss=design.centre.spring_loss_factor*design.centre.spring_rate, frame_radius=b, frequency_max=frequency_max,
        unresolved_above=np.inf if wanted <= most else frequency_max*most/wanted)


def _widest(film, q):
    """Largest extent of an element, or of the centre, in arcsin of radius over frame radius."""
    radial, _ = flm.expand(film, q, at_rest=True)
    edges = np.concatenate([[0.0], radial[::film.mesh.order]])/film.mesh.edges[-1]
    return np.max(np.diff(np.arcsin(np.clip(edges, 0, 1))))


def air_mass(system, shapes=None):
    """N_s times the low-frequency air mass, kg: over the free numbers, or over shapes (n, n_dof)."""
    c = system.projector if shapes is None else system.projector @ shapes.T
    if not system.air_load:
        return np.zeros((c.shape[1],)*2)
    kernel = radiation.static_mass_matrix(len(c))
    return system.rear.faces*system.air.density*system.frame_radius**3*(c.T @ (kernel @ c))
