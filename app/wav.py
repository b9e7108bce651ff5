"""WAV files: read from bytes of any common kind, with words for what cannot be read; written."""

from dataclasses import dataclass

import numpy as np

LONGEST = 30.0           # s of a person's own clip
RATES = (8000, 192000)   # Hz, of WAV files read
MOST_CHANNELS = 32
PCM, FLOAT, EXTENSIBLE = 1, 3, 0xFFFE
UNKNOWN_LENGTH = 0xFFFFFFFF
KINDS = {(PCM, 8), (PCM, 16), (PCM, 24), (PCM, 32), (FLOAT, 32), (FLOAT, 64)}
REMEDY = "Save it as WAV, PCM of 16 or 24 bit or 32-bit float."


@dataclass(frozen=True)
class Layout:
    """How a WAV file holds its samples."""

    format: int              # PCM or FLOAT
    bits: int                # of a sample
    channels: int
    rate: int                # Hz
    start: int               # byte at which the samples begin
    n_frames: int


def layout(data, size, name):
    """Layout of a WAV file, from its first bytes on; None where these do not reach the samples.

    Parameters
    ----------
    data : bytes
        The file, or its beginning.
    size : int
        Bytes of the whole file.
    name : str

    Raises
    ------
    ValueError
        If it is no WAV file that can be used: file, what is wrong, remedy.
    """
    if size < 12 or (len(data) >= 12 and (data[:4], data[8:12]) != (b"RIFF", b"WAVE")):
        what = "is empty" if size == 0 else "is not a WAV file"
        raise ValueError(f"{name} {what}. {REMEDY}")
    place, about = 12, None
    while place + 8 <= len(data):
        word, length = data[place:place + 4], int.from_bytes(data[place + 4:place + 8], "little")
        place += 8
        if word == b"data":
            if about is None:
                raise _damaged(name, "its samples come before their format")
            return _measured(*about, place, length, size, name)
        if word == b"fmt " and place + length <= len(data):
            about = _format(data[place:place + length], name)
        place += length + length % 2
    if len(data) >= size:
        raise _damaged(name, "it holds no samples")
    return None


def _damaged(name, why):
    return ValueError(f"{name} is damaged or did not arrive whole: {why}. {REMEDY}")


def _format(chunk, name):
    """(format, bits, channels, rate) of a format chunk."""
    if len(chunk) < 16:
        raise _damaged(name, "its format is cut short")
    code, channels, rate, _, align, bits = np.frombuffer(chunk[:16], "<u2,<u2,<u4,<u4,<u2,<u2")[0].tolist()
    if code == EXTENSIBLE and len(chunk) >= 26:
        code = int.from_bytes(chunk[24:26], "little")
    if code not in (PCM, FLOAT):
        raise ValueError(f"{name} is compressed or coded (format {code}), which is not read here. {REMEDY}")
    width = 8 * align // max(channels, 1)      # bits a sample takes: 24 for one of 20
    if code == PCM and width - 8 < bits <= width:
        bits = width
    if (code, bits) not in KINDS or not 1 <= channels <= MOST_CHANNELS or 8 * align != channels * bits:
        raise ValueError(f"{name} has {channels} channels of {bits} bit ({align} bytes together), which is not read here. "
                         f"{REMEDY}")
    if not RATES[0] <= rate <= RATES[1]:
        raise ValueError(f"{name} has a rate of {rate} Hz; rates of 8 to 192 kHz are read. Save it at 48 kHz.")
    return code, bits, channels, rate


def _measured(code, bits, channels, rate, start, length, size, name):
    """Layout with the number of frames, which must all be there and not too many."""
    there, frame = size - start, channels * bits // 8
    promised = there if length == UNKNOWN_LENGTH else length
    seconds = promised // frame / rate
    if seconds > LONGEST:
        raise ValueError(f"{name} is {seconds:.1f} s long; a clip may last {LONGEST:.0f} s. Cut a part out of it.")
    if promised > there:
        raise _damaged(name, f"it should hold {seconds:.2f} s and ends after {there // frame / rate:.2f} s")
    if promised < frame:
        raise ValueError(f"{name} is empty: it holds no samples. Choose a file with sound.")
    return Layout(code, bits, channels, rate, start, promised // frame)


def read_wav(data, name):
    """(samples (n,), rate in Hz): the mean of a WAV file's channels, full scale 1. Raises ValueError as `layout` does."""
    found = layout(data, len(data), name)
    n_bytes = found.n_frames * found.channels * found.bits // 8
    raw = np.frombuffer(data, np.uint8, n_bytes, found.start)
    if found.format == FLOAT:
        values = raw.view(f"<f{found.bits // 8}").astype(float)
    elif found.bits == 8:
        values = raw / 128.0 - 1.0
    else:       # in the upper bytes of 32 bit
        wide = np.zeros((raw.size * 8 // found.bits, 4), np.uint8)
        wide[:, 4 - found.bits // 8:] = raw.reshape(len(wide), -1)
        values = wide.ravel().view("<i4") / 2.0**31
    if not np.max(np.abs(values)) < 1e30:        # a NaN is not smaller either
        raise _damaged(name, "it holds values that are no numbers, or endless")
    return values.reshape(-1, found.channels).mean(axis=1), found.rate


def write_wav(samples, rate, note=""):
    """Bytes of a WAV file, 24-bit PCM, one channel, of samples (n,) within ±1; the note (ASCII) stands in it as a comment."""
    whole = np.round(np.clip(samples, -1.0, 1.0) * (2**23 - 1)).astype("<i4")
    body = whole.view(np.uint8).reshape(-1, 4)[:, :3].tobytes()
    about = np.array([(PCM, 1, rate, 3 * rate, 3, 24)], "<u2,<u2,<u4,<u4,<u2,<u2").tobytes()
    said = note.encode("ascii", "replace") + b"\0"
    told = _chunk(b"LIST", b"INFO" + _chunk(b"ICMT", said)) if note else b""
    return _chunk(b"RIFF", b"WAVE" + _chunk(b"fmt ", about) + told + _chunk(b"data", body))


def _chunk(word, body):
    return word + len(body).to_bytes(4, "little") + body + b"\0" * (len(body) % 2)
