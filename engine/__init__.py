"""Elastovox engine: pure functions from a design to what its loudspeaker does.

Conventions, said once: SI units and radians; time dependence e^{+i omega t}; amplitudes are peak values; frequency in
Hz is the leading axis of every result; the axis z points from the frame plane to the listener; volumes swept towards
the listener are positive. Inputs and results are frozen dataclasses holding read-only arrays.
"""

from engine.design import Air, Centre, Design, Drive, Electrodes, Film, Geometry, Listener, Rear
from engine.designfile import load, save
from engine.errors import InvalidDesign, NoRestState, NotConverged
from engine.modes import Modes, modes
from engine.response import Response, prepare, response
from engine.statics import Equilibrium, Finding, equilibrium
from engine.summary import KeyFigures, Overview, energy_share, key_figures, overview

__all__ = [
    "Air", "Centre", "Design", "Drive", "Electrodes", "Equilibrium", "Film", "Finding", "Geometry", "InvalidDesign",
    "KeyFigures", "Listener", "Modes", "NoRestState", "NotConverged", "Overview", "Rear", "Response", "energy_share",
    "equilibrium", "key_figures", "load", "modes", "overview", "prepare", "response", "save"]
