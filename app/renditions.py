"""All versions of one clip for one design: what is to be done, what is there, what the page says of it."""

import math
from dataclasses import dataclass, field, replace

import numpy as np

from app import clips, theme, wav
from app.hearing import FOR_A_TONE, VERSIONS
from app.loudness import matched

STEPS = (1.0, 2.0, 5.0, 10.0)      # of the full scale of a file, in Pa


@dataclass
class Renditions:
    """Versions of a clip for a design, one rendered after another."""

    number: int
    design: object
    clip: clips.Clip
    queue: list = field(default_factory=list)      # versions still to be rendered, the next one first
    at_work: str | None = None                     # the version being rendered
    done: dict = field(default_factory=dict)       # version -> app.hearing.Rendition
    faults: dict = field(default_factory=dict)     # version -> why it cannot be had

    def is_of(self, design, clip=None):
        """Whether it sounds as this design does, whose name, note and drive law make no difference; and is of this clip."""
        return _as_heard(self.design) == _as_heard(design) and (clip is None or (
            self.clip.name == clip.name and np.array_equal(self.clip.samples, clip.samples)))

    def want(self, first):
        """Put every version that is not there on the queue, one of them first, then the one that takes the least time."""
        self.faults = {} if self.clip.frequency else {"compensated": FOR_A_TONE}
        self.queue = [name for name in VERSIONS if name not in self.done and name not in self.faults]
        self.prefer("undistorted")
        self.prefer(first)

    def prefer(self, version):
        """Render a version before the others that wait."""
        self.queue.sort(key=lambda name: name != version)

    def go_on(self):
        """Take the next version to be rendered off the queue; None if there is none."""
        self.at_work = self.queue.pop(0) if self.queue else None
        return self.at_work

    def end(self):
        """Want nothing more."""
        self.queue, self.at_work = [], None

    def matching(self):
        """app.loudness.Matching of the versions that are there."""
        return matched({name: rendition.sound for name, rendition in self.done.items()})

    def row(self, name):
        """State of a version (none, waiting, working, ready, unavailable), and what is known of it in words."""
        if name in self.done:
            return self._heard(self.done[name].sound, self.matching().gain, name)
        if name in self.faults:
            return {"state": "unavailable", "why": self.faults[name]}
        return {"state": "working" if name == self.at_work else "waiting" if name in self.queue else "none"}

    def _heard(self, sound, gains, name):
        """Level at the listener of a version that is there, and how far it is turned down."""
        if gains[name] == 0:
            return {"state": "unavailable", "why": "Silent: nothing is heard at the listener."}
        turned = 20 * math.log10(gains[name] / max(gains.values()))
        return {"state": "ready", "level": decibel_tenths(sound.level_db), "gain": decibel_tenths(turned)}

    def file(self, version):
        """(name, bytes) of a WAV file of a version; what its full scale is stands in its name and in it."""
        scale = full_scale(max(rendition.sound.peak for rendition in self.done.values()))
        said = f"{theme.digits(scale)} Pa"
        note = f"{self.design.name}: {self.clip.name}, {VERSIONS[version]}. Pressure at the listener, full scale {said}."
        stems = (self.design.name, self.clip.name.removesuffix(".wav"), VERSIONS[version])
        name = "-".join([*map(theme.file_stem, stems), "full-scale", said.replace(" ", "-")])
        return f"{name}.wav", wav.write_wav(self.done[version].pressure / scale, clips.RATE, note)


def shown(listed, heard, stage, stale):
    """What the browser shows.

    Parameters
    ----------
    listed, heard : Renditions or None
        The versions that stand in the rows, and those that can be heard: the same, unless new ones are under way.
    stage : app.worker.Stage or None
        How far the version being rendered is.
    stale : bool
        Whether the design is another by now.
    """
    match = heard.matching() if heard is not None and heard.done else None
    return {"rows": {name: {"state": "none"} if listed is None else listed.row(name) for name in VERSIONS},
            "rendered": clip_words(listed.clip) if listed else "", "stale": stale, "heard": heard.number if heard else 0,
            "gains": match.gain if match else {}, "matched": _matching_words(match) if match else "",
            "working": _working(listed, stage)}


def _working(listed, stage):
    """What is being rendered, how far it is and how long it will take; None if nothing is."""
    if listed is None or listed.at_work is None:
        return None
    left = stage.seconds_left if stage else None
    return {"part": stage.part if stage else 0.0, "version": VERSIONS[listed.at_work],
            "left": "" if left is None else f"about {max(1, round(left))} s left"}


def full_scale(peak):
    """The least of 1, 2, 5, 10 ... Pa, of whatever decade, that a peak in Pa does not pass."""
    decade = 10.0 ** math.floor(math.log10(peak))
    return next(step * decade for step in STEPS if step * decade >= peak)


def clip_words(clip):
    """Name and length of a clip."""
    return f"{clip.name}, {len(clip.samples) / clips.RATE - clips.TAIL:.1f} s"


def decibel_tenths(value):
    """A level or gain: "82.3 dB"."""
    return f"{value + 0.0:.1f} dB".replace("-0.0", "0.0").replace("-", "−")


def _matching_words(match):
    target = decibel_tenths(match.target).removesuffix(" dB")
    return (f"Equally loud after ITU-R BS.1770 (K-weighted, gated), at {target} LKFS: each version is turned down to the "
            "quietest.")


def _as_heard(design):
    return replace(design, name="-", note="", drive=replace(design.drive, law="sine"))
