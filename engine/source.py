"""The moving film as a source of sound: points on it, and the volume flow through them per motion of the mesh."""

from dataclasses import dataclass

import numpy as np

from engine import film as flm
from engine import mesh as msh


@dataclass(frozen=True)
class Source:
    """Quadrature points of the film and its centre at rest, and what they emit.

    radius, height (n_points,) m; centre_points of them lie on the rigid centre, before those of the film.
    centre_flow (centre_points,) m2: flow per unit of the centre's rise. The film's flow comes from flow().
    """

    film: flm.Film
    radius: np.ndarray
    height: np.ndarray
    centre_flow: np.ndarray
    interpolation: tuple           # E, E' of the element's Gauss points
    radial_factor: np.ndarray      # (n_elements, n_gauss): what multiplies delta z, 2 pi r r' w
    axial_factor: np.ndarray       # and delta r, -2 pi r z' w


def sample(film, q, n_gauss, n_centre=None):
    """Source of a rest state with n_gauss points an element and n_centre on the rigid centre."""
    m = film.mesh
    _, w, E, dE = msh.gauss_on_element(m.order, n_gauss)
    radial, axial = flm.expand(film, q, at_rest=True)
    r, z = m.local(radial) @ E.T, m.local(axial) @ E.T
    dr, dz = (m.local(v) @ dE.T for v in (radial, axial))      # the element's length cancels against dr0
    a = m.edges[0]
    x, wc = msh.gauss(n_centre or n_gauss)
    rc = a*(1 + x)/2
    return Source(film, np.concatenate([rc, r.ravel()]), np.concatenate([np.full(len(rc), q[0]), z.ravel()]),
                  np.pi*rc*a*wc, (E, dE), 2*np.pi*r*dr*w, -2*np.pi*r*dz*w)


def flow(source, shapes):
    """Volume flow (..., n_points) m2 per unit amplitude of shapes (..., n_dof), quadrature weights in it.

    nu dr = (r' delta z - z' delta r) 2 pi r dr0; the centre adds 2 pi r dr delta z_c.
    """
    radial, axial = flm.expand(source.film, shapes)
    E, _ = source.interpolation
    local = source.film.mesh.local
    film = (local(axial) @ E.T)*source.radial_factor + (local(radial) @ E.T)*source.axial_factor
    centre = shapes[..., :1]*source.centre_flow
    return np.concatenate([centre, film.reshape(*film.shape[:-2], -1)], axis=-1)


def flow_projection(source, functionals):
    """(n, n_dof) of functionals (n, n_points): functionals @ flow, as rows on the free numbers."""
    n_centre = len(source.centre_flow)
    on_film = functionals[:, n_centre:].reshape(len(functionals), *source.radial_factor.shape)
    E, _ = source.interpolation
    mesh = source.film.mesh
    out = np.empty((len(functionals), source.film.n_dof))
    for start, factor in ((1, source.axial_factor), (2, source.radial_factor)):
        parts = (on_film*factor) @ E
        nodal = np.zeros((len(functionals), mesh.n_nodes))
        nodal[:, :-1] = parts[..., :-1].reshape(len(functionals), -1)
        nodal[:, mesh.order::mesh.order] += parts[..., -1]         # neighbours share their edge
        out[:, start::2] = nodal[:, 1:-1]
    out[:, 0] = nodal[:, 0] + functionals[:, :n_centre] @ source.centre_flow
    return out
