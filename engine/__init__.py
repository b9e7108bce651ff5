"""Elastovox engine: pure functions from a design to what its loudspeaker does.

Conventions, said once: SI units and radians; time dependence e^{+i omega t}; amplitudes are peak values; frequency in Hz is the leading
axis of every result; the axis z points from the frame plane to the listener; volumes swept towards the listener are
positive. Inputs and results are frozen dataclasses holding read-only arrays.
"""

from engine.design import Air, Centre, Design, Drive, Electrodes, Film, Geometry, Listener, Rear
from engine.designfile import load, save
from engine.errors import InvalidDesign, NoRestState, NotConverged

__all__ = ["Air", "Centre", "Design", "Drive", "Electrodes", "Film", "Geometry", "InvalidDesign", "Listener", "NoRestState",
           "NotConverged", "Rear", "load", "save"]
