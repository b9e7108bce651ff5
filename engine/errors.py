"""The ways a computation may end without an answer."""


class InvalidDesign(ValueError):
    """A design, or the file it came from, that cannot be computed; the message names what, where and how to mend it.

    Attributes
    ----------
    key : str or None
        Path of the field at fault, such as "film.prestretch".
    value, bounds :
        What was received and the allowed (low, high), SI; None where there is none.
    """

    def __init__(self, message, key=None, value=None, bounds=None):
        super().__init__(message)
        self.key, self.value, self.bounds = key, value, bounds


class NotConverged(RuntimeError):
    """An iteration that did not reach its tolerance."""


class Stopped(RuntimeError):
    """A long computation that was told to stop."""


class NoRestState(RuntimeError):
    """A design whose film has no stable rest state at the asked bias.

    Attributes
    ----------
    reason : str
        ``"pull-in"`` (the film gives way before the asked bias), ``"slack"`` (a slack film without stiffness) or
        ``"stretch-limit"`` (the strain energy has no value at the asked stretch).
    voltage : float or None
        Bias in V at which the stable branch ends, for pull-in.
    """

    def __init__(self, message, reason="", voltage=None):
        super().__init__(message)
        self.reason = reason
        self.voltage = voltage
