"""What is behind the film: nothing but air (open), or a closed volume (sealed)."""

from dataclasses import dataclass


@dataclass(frozen=True)
class Rear:
    """stiffness, Pa/m3: pressure behind per swept volume, rho c^2/V; loss_factor of it; faces that carry the air's load."""

    stiffness: float
    loss_factor: float
    faces: int


def from_design(design, air):
    """The rear of a design in the given air.

    A sealed volume is a spring (uniform pressure, lumped: good while the volume is small against the wavelength);
    open, both faces of the film radiate into half-spaces of their own.

    Source: Kinsler & Frey, ch. 10; Beranek 1954.
    """
    if design.rear.kind == "sealed":
        return Rear(air.density*air.sound_speed**2/design.rear.volume, design.rear.loss_factor, 1)
    return Rear(0.0, 0.0, 2)
