"""Spectral elements on the meridian: Gauss-Lobatto nodes, derivatives, quadrature, interpolation."""

from dataclasses import dataclass
from functools import cached_property, lru_cache

import numpy as np
from numpy.polynomial import legendre


@lru_cache
def gauss_lobatto(order):
    """Nodes on [-1, 1], weights and barycentric weights of the Gauss-Lobatto-Legendre rule with order + 1 points.

    Source: Canuto, Hussaini, Quarteroni & Zang 2006, sec. 2.3.
    """
    leading = np.zeros(order + 1)
    leading[-1] = 1
    inner = np.real(legendre.legroots(legendre.legder(leading)))
    x = np.concatenate([[-1.0], np.sort(inner), [1.0]])
    P = legendre.legval(x, leading)
    return x, 2/(order*(order + 1)*P**2), _barycentric(x)


def _barycentric(x):
    """Barycentric weights of the nodes x, scaled to a largest one of 1."""
    d = x[:, None] - x + np.eye(len(x))
    w = 1/np.prod(d, axis=1)
    return w/np.max(np.abs(w))


@lru_cache
def reference_derivative(order):
    """Matrix (order+1, order+1) that takes nodal values to derivatives at the nodes, on [-1, 1]."""
    x, _, w = gauss_lobatto(order)
    d = x[:, None] - x + np.eye(order + 1)
    D = w/w[:, None]/d
    np.fill_diagonal(D, 0)
    return D - np.diag(D.sum(axis=1))


@lru_cache
def derivative_products(order):
    """(order+1, (order+1)^2): D_ki D_kj of the reference derivative, so that weights @ it are D^T diag(weights) D."""
    D = reference_derivative(order)
    return (D[:, :, None]*D[:, None, :]).reshape(order + 1, -1)


def lagrange(order, points):
    """Values (n_points, order+1) of the element's Lagrange polynomials at points in [-1, 1]."""
    x, _, w = gauss_lobatto(order)
    d = np.asarray(points, float)[:, None] - x
    hit = d == 0
    q = w/np.where(hit, 1.0, d)
    return np.where(hit.any(axis=1)[:, None], hit, q/q.sum(axis=1)[:, None])


@lru_cache
def gauss(n_points):
    """Gauss-Legendre rule on [-1, 1]: (x, weights)."""
    return legendre.leggauss(n_points)


@lru_cache
def to_legendre(order):
    """Matrix (order+1, order+1) from an element's nodal values to its Legendre coefficients."""
    return np.linalg.inv(legendre.legvander(gauss_lobatto(order)[0], order))


@lru_cache
def gauss_on_element(order, n_points):
    """Gauss rule on [-1, 1] with the element's polynomials and derivatives there: (x, weights, E, E')."""
    x, w = gauss(n_points)
    E = lagrange(order, x)
    return x, w, E, E @ reference_derivative(order)


@dataclass(frozen=True)
class Mesh:
    """Elements of one order on the reference radius; neighbours share their edge nodes.

    edges (n_elements+1,) m; radius (n_nodes,) m; nodes (n_elements, order+1) node numbers; half_length (n_elements,) m;
    weight (n_elements, order+1) m, the quadrature weights of the nodes.
    """

    order: int
    edges: np.ndarray
    radius: np.ndarray
    nodes: np.ndarray
    half_length: np.ndarray
    weight: np.ndarray

    @cached_property
    def local_radius(self):
        """(n_elements, order+1) m: the nodes' reference radii, element by element."""
        return self.radius[self.nodes]

    @cached_property
    def derivative_matrix(self):
        """(n_elements, order+1, order+1) 1/m: from an element's nodal values to their slopes."""
        return reference_derivative(self.order)/self.half_length[:, None, None]

    @cached_property
    def local_square(self):
        """(n_elements, order+1) m2: the square of local_radius."""
        return self.local_radius**2

    @property
    def n_nodes(self):
        return len(self.radius)

    @property
    def n_elements(self):
        return len(self.edges) - 1

    def local(self, values):
        """Nodal values (..., n_nodes) -> (..., n_elements, order+1)."""
        return values[..., self.nodes]

    def derivative(self, values):
        """d/dr0 of nodal values (..., n_nodes), element by element: (..., n_elements, order+1)."""
        return self.local(values) @ reference_derivative(self.order).T/self.half_length[:, None]


def build(edges, order):
    """Mesh with the given element edges (n_elements+1,) in m, ascending."""
    edges = np.asarray(edges, float)
    n = len(edges) - 1
    x, w, _ = gauss_lobatto(order)
    half = np.diff(edges)/2
    inner = edges[:-1, None] + half[:, None]*(1 + x[:-1])
    radius = np.append(inner.ravel(), edges[-1])
    nodes = np.arange(n)[:, None]*order + np.arange(order + 1)
    return Mesh(order, edges, radius, nodes, half, half[:, None]*w)


def equidistributed(density, r0, n_elements):
    """Edges (n_elements+1,) that give every element the same integral of density, known at ascending r0."""
    count = np.concatenate([[0], np.cumsum(np.diff(r0)*(density[1:] + density[:-1])/2)])
    edges = np.interp(np.linspace(0, count[-1], n_elements + 1), count, r0)
    edges[[0, -1]] = r0[[0, -1]]
    return edges


def interpolate(mesh, values, r0):
    """Values (..., n_nodes) at other reference radii r0 (n,): (..., n)."""
    element = np.clip(np.searchsorted(mesh.edges, r0, side="right") - 1, 0, mesh.n_elements - 1)
    local = (r0 - mesh.edges[element])/mesh.half_length[element] - 1
    L = lagrange(mesh.order, local)
    return np.einsum("...ij,ij->...i", values[..., mesh.nodes[element]], L)
