"""The film on its mesh: energy, residual, tangent, mass, dissipation, electrode load, swept volume (turning-symmetric motion).

The state is (r, z) of every node; the free numbers q are the height of node 0 (the centre's edge, which is rigid and
only rises) and r, z of every node between it and the frame. Notation of DEVELOPERS.md: A = r'^2 + z'^2, B = (r/r0)^2.
"""

from dataclasses import dataclass
from functools import cached_property, lru_cache

import numpy as np

from engine import material
from engine.mesh import Mesh, derivative_products, reference_derivative

VACUUM_PERMITTIVITY = 8.8541878128e-12      # F/m, CODATA 2018


@dataclass(frozen=True)
class Film:
    """A design's film with its electrodes, centre and spring on a mesh; SI, everything of the flat stretched sheet."""

    mesh: Mesh
    law: str
    law_parameters: tuple
    shear_modulus: float
    prestretch: float
    thickness: float              # m, all layers, as mounted
    areal_capacitance: float      # F/m2, all layers in parallel, flat
    layer_thickness: float        # m, as mounted
    electrode_stiffness: float    # Pa m, (N+1) t_e mu_e/2
    areal_mass: float             # kg/m2 with the electrodes
    centre_mass: float
    spring_rate: float
    spring_free_height: float

    @property
    def dofs(self):
        """(n_elements, 2(order+1)) places of an element's r then z in q; fixed ones point at the extra place n_dof."""
        return _places(self.mesh.n_elements, self.mesh.order)[0]

    @property
    def n_dof(self):
        return 2*self.mesh.n_nodes - 3

    @cached_property
    def area(self):
        """(n_elements, order+1) m2: 2 pi r0 dr0 at the nodes."""
        return 2*np.pi*self.mesh.local_radius*self.mesh.weight

    @cached_property
    def mass(self):
        """(n_dof,) kg: the diagonal mass of film, electrodes and centre."""
        m = np.zeros(self.n_dof + 1)
        np.add.at(m, self.dofs, self.areal_mass*np.tile(self.area, 2))
        m[0] += self.centre_mass
        return m[:-1]


@lru_cache(maxsize=64)
def _places(n_elements, order):
    """Element by element: dofs of Film; places of blocks in the raveled matrix; places of r, z in (q, a, b, 0)."""
    n = n_elements*order + 1
    nodes = np.arange(n_elements)[:, None]*order + np.arange(order + 1)
    place = np.arange(-1, 2*n - 1).reshape(n, 2)    # node j: r at 2j-1, z at 2j
    place[0] = 2*n - 3, 0
    place[-1] = 2*n - 3
    dofs = place[nodes].transpose(0, 2, 1).reshape(n_elements, -1)
    at_rest = place.copy()
    at_rest[0, 0], at_rest[-1] = 2*n - 3, (2*n - 2, 2*n - 1)
    blocks = dofs[:, :, None]*(2*n - 2) + dofs[:, None, :]
    return dofs, blocks.ravel(), np.moveaxis(at_rest[nodes], 2, 0)


def from_fields(f, e, c, mesh):
    """The film of a design's film, electrodes and centre groups on a mesh from the centre's edge to the frame."""
    t = f.thickness/f.prestretch**2
    n = f.layers
    return Film(
        mesh=mesh, law=f.law, law_parameters=f.law_parameters, shear_modulus=f.shear_modulus, prestretch=f.prestretch,
        thickness=n*t, layer_thickness=t,
        areal_capacitance=n*VACUUM_PERMITTIVITY*f.relative_permittivity/t,
        electrode_stiffness=(n + 1)*e.thickness*e.shear_modulus/2,
        areal_mass=n*t*f.density + (n + 1)*e.thickness*e.density,
        centre_mass=c.mass, spring_rate=c.spring_rate, spring_free_height=c.spring_free_height)


def expand(film, shape, at_rest=False):
    """(radial, axial) nodal values (..., n_nodes) of free numbers (..., n_dof); at_rest adds the clamped radii."""
    n = film.mesh.n_nodes
    radial, axial = np.zeros((2, *shape.shape[:-1], n), shape.dtype)
    axial[..., 0] = shape[..., 0]
    radial[..., 1:-1] = shape[..., 1::2]
    axial[..., 1:-1] = shape[..., 2::2]
    if at_rest:
        radial[..., [0, -1]] = film.mesh.radius[[0, -1]]
    return radial, axial


def collect(film, radial, axial):
    """The inverse of expand: free numbers (n_dof,) of nodal values (n_nodes,)."""
    q = np.empty(film.n_dof)
    q[0] = axial[0]
    q[1::2], q[2::2] = radial[1:-1], axial[1:-1]
    return q


@dataclass(frozen=True)
class Strain:
    """Element-wise r, r', z' and A, B, each (..., n_elements, order+1)."""

    r: np.ndarray
    dr: np.ndarray
    dz: np.ndarray
    A: np.ndarray
    B: np.ndarray


def strain(film, q):
    """Strain of states q (..., n_dof)."""
    mesh = film.mesh
    where = _places(mesh.n_elements, mesh.order)[2]
    clamped = np.broadcast_to([mesh.edges[0], mesh.edges[-1], 0.0], (*q.shape[:-1], 3))
    local = np.concatenate([q, clamped], axis=-1)[..., where]
    slope = local @ reference_derivative(mesh.order).T/mesh.half_length[:, None]
    r, dr, dz = local[..., 0, :, :], slope[..., 0, :, :], slope[..., 1, :, :]
    return Strain(r, dr, dz, dr**2 + dz**2, r**2/mesh.local_square)


def surface_energy(film, A, B, voltage, electrodes=True):
    """w(A, B; V) in J/m2 of the flat sheet and (w_A, w_B, w_AA, w_AB, w_BB)."""
    h = film.thickness
    W = [h*term for term in material.strain_energy(
        film.law, film.law_parameters, film.shear_modulus, film.prestretch, A, B)]
    if electrodes and film.electrode_stiffness:
        # (mu_e/2)(A + B + 1/(AB) - 3): the first invariant of a layer that is stress-free when flat
        I1 = material.first_invariant(A, B, 1.0)
        for k, term in enumerate(I1):
            W[k] = W[k] + film.electrode_stiffness*(term - 3*(k == 0))
    c = film.areal_capacitance*voltage**2/2
    return W[0] - c*A*B, W[1] - c*B, W[2] - c*A, W[3], W[4] - c, W[5]


def energy_slopes(film, A, B, voltage, electrodes=True):
    """(w_A, w_B) of surface_energy alone, in the precision of A and B."""
    wA, wB = material.energy_slopes(film.law, film.law_parameters, film.thickness*film.shear_modulus, film.prestretch, A, B)
    if electrodes and film.electrode_stiffness:
        q = film.electrode_stiffness/(A*B)
        wA, wB = wA + (film.electrode_stiffness - q/A), wB + (film.electrode_stiffness - q/B)
    c = film.areal_capacitance/2*voltage**2
    return wA - c*B, wB - c*A


def strain_rows(film, e):
    """(n_elements, 2(order+1), 2(order+1)): rows delta A of all points then delta B, columns r then z."""
    n, p1 = film.mesh.n_elements, film.mesh.order + 1
    D = film.mesh.derivative_matrix
    rows = np.zeros((n, 2*p1, 2*p1))
    rows[:, :p1, :p1] = 2*e.dr[..., None]*D
    rows[:, :p1, p1:] = 2*e.dz[..., None]*D
    i = np.arange(p1)
    rows[:, p1 + i, i] = 2*e.r/film.mesh.local_radius**2
    return rows


def assemble_matrix(film, blocks):
    """(n_dof, n_dof) from element blocks (n_elements, 2(order+1), 2(order+1))."""
    n = film.n_dof + 1
    places = _places(film.mesh.n_elements, film.mesh.order)[1]
    return np.bincount(places, blocks.ravel(), n*n).reshape(n, n)[:-1, :-1]


def assemble_vector(film, parts):
    """(n_dof,) from element parts (n_elements, 2(order+1))."""
    return np.bincount(film.dofs.ravel(), parts.ravel(), film.n_dof + 1)[:-1]


def _blocks(film, e, AA, AB, BB, A=0.0, B=0.0):
    """Element blocks of AA dA^2 + 2 AB dA dB + BB dB^2 + A d2A + B d2B, quadrature weights in the factors."""
    mesh, p1 = film.mesh, film.mesh.order + 1
    D, half = reference_derivative(mesh.order), mesh.half_length[:, None]
    p, s, beta = 2*e.dr/half, 2*e.dz/half, 2*e.r/mesh.local_square       # dA = p D dr + s D dz, dB = beta dr
    straight = 2*A/half**2
    bends = np.stack([AA*p**2 + straight, AA*p*s, AA*s**2 + straight]).reshape(-1, p1) @ derivative_products(mesh.order)
    rr, rz, zz = bends.reshape(3, mesh.n_elements, p1, p1)
    mixed = (AB*beta)[..., None]*D                      # row of B's point, slope of A
    turned = p[..., None]*mixed
    K = np.empty((mesh.n_elements, 2*p1, 2*p1))
    K[:, :p1, :p1] = rr + turned + turned.transpose(0, 2, 1)
    i = np.arange(p1)
    K[:, i, i] += BB*beta**2 + 2*B/mesh.local_square
    K[:, :p1, p1:] = rz + s[..., None]*mixed
    K[:, p1:, :p1] = K[:, :p1, p1:].transpose(0, 2, 1)
    K[:, p1:, p1:] = zz
    return K


def potential(film, q, voltage):
    """Pi(q; V) in J: film, electrodes, field and spring; infinite where the strain energy has no value."""
    e = strain(film, q)
    w = surface_energy(film, e.A, e.B, voltage)[0]
    return np.sum(film.area*w) + film.spring_rate*(film.spring_free_height - q[0])**2/2


def residual(film, q, voltage):
    """dPi/dq (n_dof,) in N."""
    e = strain(film, q)
    _, wA, wB, *_ = surface_energy(film, e.A, e.B, voltage)
    return _residual(film, q, e, film.area*wA, film.area*wB)


def _gradient(film, e, A, B):
    """(n_dof,): A dA + B dB, quadrature weights in the factors."""
    weight = 2*A/film.mesh.half_length[:, None]
    slopes = np.stack([weight*e.dr, weight*e.dz]) @ reference_derivative(film.mesh.order)
    slopes[0] += 2*B*e.r/film.mesh.local_square
    return assemble_vector(film, np.concatenate(list(slopes), axis=1))


def _residual(film, q, e, A, B):
    g = _gradient(film, e, A, B)
    g[0] -= film.spring_rate*(film.spring_free_height - q[0])
    return g


def linearise(film, q, voltage):
    """(Pi, dPi/dq, d2Pi/dq2) of a state."""
    e = strain(film, q)
    w, *derivatives = surface_energy(film, e.A, e.B, voltage)
    A, B, AA, AB, BB = (film.area*part for part in derivatives)
    tangent = assemble_matrix(film, _blocks(film, e, AA, AB, BB, A, B))
    tangent[0, 0] += film.spring_rate
    spring = film.spring_rate*(film.spring_free_height - q[0])**2/2
    return np.sum(film.area*w) + spring, _residual(film, q, e, A, B), tangent


def electrode_load(film, q, voltage):
    """f = -d2Pi/dq dV (n_dof,) in N/V."""
    e = strain(film, q)
    c = film.areal_capacitance*voltage*film.area
    return _gradient(film, e, c*e.B, c*e.A)


def dissipation(film, q):
    """D0 (n_dof, n_dof): q^T D0 q = integral of 2h(d1^2 + d2^2 + (d1 + d2)^2) dA0, d = delta lam/lam."""
    e = strain(film, q)
    c = film.area*film.thickness
    # d1 = dA/2A, d2 = dB/2B; 2(d1^2 + d2^2 + (d1 + d2)^2) = 4(d1^2 + d1 d2 + d2^2)
    return assemble_matrix(film, _blocks(film, e, c/e.A**2, c/(2*e.A*e.B), c/e.B**2))


def swept_volume(film, q):
    """S = -integral of pi r^2 z' dr0 in m3, the centre's part included, and s = dS/dq (n_dof,) in m2."""
    e = strain(film, q)
    w = film.mesh.weight
    radial = -2*np.pi*w*e.r*e.dz
    axial = -(np.pi*w*e.r**2/film.mesh.half_length[:, None]) @ reference_derivative(film.mesh.order)
    s = assemble_vector(film, np.concatenate([radial, axial], axis=1))
    return -np.sum(np.pi*w*e.r**2*e.dz), s


def capacitance(film, q):
    """F, at the state q."""
    e = strain(film, q)
    return film.areal_capacitance*np.sum(film.area*e.A*e.B)


def cauchy_stress(film, q, voltage):
    """(sigma1, sigma2) of the film, Maxwell part included, and field, each (..., n_elements, order+1); Pa, V/m.

    q (..., n_dof); voltage a number, or (..., 1, 1).
    """
    e = strain(film, q)
    _, wA, wB, *_ = surface_energy(film, e.A, e.B, voltage, electrodes=False)
    field = voltage*np.sqrt(e.A*e.B)/film.layer_thickness
    return 2*e.A*wA/film.thickness, 2*e.B*wB/film.thickness, field
