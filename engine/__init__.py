"""Elastovox engine: pure functions from a design to what its loudspeaker does.

Conventions, said once: SI units and radians; time dependence e^{+i omega t}; amplitudes are peak values; frequency in
Hz is the leading axis of every result; the axis z points from the frame plane to the listener; volumes swept towards
the listener are positive. Inputs and results are frozen dataclasses holding read-only arrays.
"""

from engine.compensation import CompensatedDrive, compensated_drive
from engine.design import Air, Centre, Design, Drive, Electrodes, Film, Geometry, Listener, Rear
from engine.designfile import load, save
from engine.distortion import Distortion, distortion
from engine.distortion_view import (
    AmplitudeSeries,
    DistortionMap,
    DistortionView,
    amplitude_series,
    distortion_map,
    distortion_view,
)
from engine.errors import InvalidDesign, NoRestState, NotConverged, Stopped
from engine.intermodulation import Intermodulation, intermodulation
from engine.limits import Excursion, Judgement, LimitsView, Margin, breakdown_band, excursion, limits_view, margins
from engine.modes import Modes, modes
from engine.response import Response, prepare, response
from engine.signals import render
from engine.statics import Equilibrium, Finding, equilibrium
from engine.summary import KeyFigures, Overview, energy_share, key_figures, overview
from engine.window import VoltageWindow, voltage_window

__all__ = [
    "Air", "AmplitudeSeries", "Centre", "CompensatedDrive", "Design", "Distortion", "DistortionMap", "DistortionView",
    "Drive", "Electrodes", "Equilibrium", "Excursion", "Film", "Finding", "Geometry", "Intermodulation",
    "InvalidDesign", "Judgement", "KeyFigures", "LimitsView", "Listener", "Margin", "Modes", "NoRestState",
    "NotConverged", "Overview", "Rear", "Response", "Stopped", "VoltageWindow", "amplitude_series", "breakdown_band",
    "compensated_drive", "distortion", "distortion_map", "distortion_view", "energy_share", "equilibrium",
    "excursion", "intermodulation", "key_figures", "limits_view", "load", "margins", "modes", "overview", "prepare",
    "render", "response", "save", "voltage_window"]
