"""Designs for reference values that are given in units of A (undeformed centre radius), H, mu and rho."""

import numpy as np

from engine.design import Design
from engine.film import VACUUM_PERMITTIVITY

A, H, MU, RHO, EPS_R = 10e-3, 100e-6, 100e3, 1000.0, 3.0
FREQUENCY_UNIT = np.sqrt(MU/RHO)/A/(2*np.pi)       # Hz per unit of omega A sqrt(rho/mu)


def voltage(e):
    """V for e = eps phi^2/(mu H^2)."""
    return H*np.sqrt(e*MU/(VACUUM_PERMITTIVITY*EPS_R))


def cone(q, prestretch, e=0.0, spring=0.0, free_height=0.0, mass=0.0, law="neo-hookean", parameters=()):
    """Design in vacuo; spring in K/(mu H), free_height in A, mass in kg."""
    return Design().with_values({
        "geometry.centre_radius": prestretch*A, "geometry.frame_radius": prestretch*q*A,
        "film.law": law, "film.law_parameters": parameters, "film.shear_modulus": MU, "film.density": RHO,
        "film.thickness": H, "film.layers": 1, "film.prestretch": prestretch, "film.relative_permittivity": EPS_R,
        "film.breakdown_field": 500e6, "film.loss_factor": 0.0, "electrodes.thickness": 0.0,
        "centre.mass": mass, "centre.spring_rate": spring*MU*H, "centre.spring_free_height": free_height*A,
        "centre.spring_loss_factor": 0.0, "rear.kind": "open", "air.load": False,
        "drive.bias": voltage(e), "drive.amplitude": 0.0})
