"""One clip as it sounds at the listener: driven by either law, compensated, or undistorted."""

from dataclasses import dataclass

import numpy as np

import engine
from app import clips
from app.loudness import Sound, measured
from engine.errors import NotConverged

# what can be heard: name -> words
VERSIONS = {"sine": "sine drive", "square-root": "square-root drive", "compensated": "compensated drive",
            "undistorted": "undistorted"}
FOR_A_TONE = "Only a tone can be compensated: the drive is made for a periodic signal."


@dataclass(frozen=True)
class Rendition:
    """A version of a clip."""

    pressure: np.ndarray     # (n,) float32 Pa at the listener, at app.clips.RATE
    sound: Sound


def heard(design, clip, version, progress, stop):
    """Rendition of a clip: its largest value drives the film with the design's amplitude.

    Parameters
    ----------
    design : engine.design.Design
        Its drive.law does not matter.
    clip : app.clips.Clip
    version : str
        One of `VERSIONS`.
    progress, stop : callable
        As `engine.render` takes them.

    Raises
    ------
    InvalidDesign, NoRestState, NotConverged
        If that version of it cannot be rendered, with the reason in words.
    Stopped
    """
    law = version if version == "square-root" else "sine"
    design = design.with_values({"drive.law": law})
    samples, volts = clip.samples, version == "compensated"
    if volts:
        samples = _compensating(design, clip)
    pressure = engine.render(design, samples, clips.RATE, progress, stop, linear=version == "undistorted", volts=volts)
    return Rendition(pressure.astype(np.float32), measured(pressure, clips.RATE))


def _compensating(design, clip):
    """Source voltage (n,) V, deviation from the bias, whose sound has no harmonics; NotConverged says why there is none."""
    if clip.frequency is None:
        raise NotConverged(FOR_A_TONE)
    drive = engine.compensated_drive(design, clip.frequency)
    if not drive.achieved:
        raise NotConverged(drive.finding)
    return clips.periodic(clip.frequency, drive.source_voltage)
