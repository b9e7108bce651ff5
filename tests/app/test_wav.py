"""WAV files against the standard library's `wave` and scipy.io.wavfile; every fault in words."""

import io
import struct
import wave

import numpy as np
import pytest
from scipy.io import wavfile

from app.wav import layout, read_wav, write_wav

rng = np.random.default_rng(11)
SOUND = rng.uniform(-1, 1, 500)


def by_wave(values, width, channels=1, rate=44100):
    """A file of the standard library: whole numbers of so many bytes."""
    file = io.BytesIO()
    with wave.open(file, "wb") as out:
        out.setnchannels(channels)
        out.setsampwidth(width)
        out.setframerate(rate)
        out.writeframes(b"".join(int(v).to_bytes(width, "little", signed=width > 1) for v in values))
    return file.getvalue()


def by_scipy(values, rate=48000):
    file = io.BytesIO()
    wavfile.write(file, rate, values)
    return file.getvalue()


def made(code=1, channels=1, rate=48000, bits=16, body=b"\1\0" * 100, promised=None, before=b"", extra=b"", align=None):
    """A file byte by byte. Source: the RIFF WAVE format, chunks "fmt " and "data"."""
    align = channels * bits // 8 if align is None else align
    about = struct.pack("<HHIIHH", code, channels, rate, rate * align, align, bits) + extra
    chunks = before + b"fmt " + struct.pack("<I", len(about)) + about
    chunks += b"data" + struct.pack("<I", len(body) if promised is None else promised) + body
    return b"RIFF" + struct.pack("<I", 4 + len(chunks)) + b"WAVE" + chunks


@pytest.mark.parametrize(("width", "step"), [(1, 1 / 128), (2, 1 / 32768), (3, 2.0**-23), (4, 2.0**-31)])
def test_whole_numbers_of_each_width(width, step):
    levels = np.round(SOUND / step).clip(-1 / step, 1 / step - 1)
    written = levels + 128 if width == 1 else levels
    samples, rate = read_wav(by_wave(written, width), "x.wav")
    assert rate == 44100
    assert samples == pytest.approx(levels * step, abs=1e-12)


@pytest.mark.parametrize("dtype", [np.float32, np.float64, np.int16, np.int32])
def test_files_of_scipy_with_several_channels(dtype):
    values = SOUND.reshape(-1, 5)
    scale = 1.0 if np.dtype(dtype).kind == "f" else np.iinfo(dtype).max + 1.0
    stored = (values * (scale if scale == 1 else scale - 1)).astype(dtype)
    samples, rate = read_wav(by_scipy(stored, 96000), "x.wav")
    assert rate == 96000
    assert samples == pytest.approx((stored / scale).mean(axis=1), abs=1e-7)


def test_an_extensible_header_odd_chunks_and_an_unknown_length_are_read():
    code_of_pcm = struct.pack("<HHIH", 22, 16, 4, 1) + b"\0\0\0\0\x10\0\x80\0\0\xaa\0\x38\x9b\x71"
    odd = b"note" + struct.pack("<I", 3) + b"abc\0"
    data = made(code=0xFFFE, extra=code_of_pcm, before=odd, promised=0xFFFFFFFF)
    assert read_wav(data, "x.wav")[0] == pytest.approx(np.full(100, 1 / 32768))


def test_twenty_bits_in_three_bytes_are_read_from_the_top():
    data = made(bits=20, align=3, body=(2**22).to_bytes(3, "little") * 10)
    assert read_wav(data, "x.wav")[0] == pytest.approx(np.full(10, 0.5))


def test_what_is_written_is_read_by_others():
    data = write_wav(SOUND, 48000, "full scale 2 Pa")
    with wave.open(io.BytesIO(data)) as file:
        assert (file.getnchannels(), file.getsampwidth(), file.getframerate(), file.getnframes()) == (1, 3, 48000, 500)
    rate, stored = wavfile.read(io.BytesIO(data))
    assert rate == 48000
    assert stored / 2.0**31 == pytest.approx(SOUND, abs=2.5e-7)
    assert b"INFOICMT" in data and b"full scale 2 Pa\0" in data
    assert read_wav(data, "x.wav")[0] == pytest.approx(SOUND, abs=2.5e-7)


NAN = by_scipy(np.array([0.1, np.nan, 0.2], np.float32))
FAULTS = {
    "empty file": (b"", "x.wav is empty"),
    "text": (b"this is no sound at all", "x.wav is not a WAV file"),
    "another container": (b"RIFF\0\0\0\0AVI LIST" + b"\0" * 50, "not a WAV file"),
    "compressed": (made(code=2, bits=4, align=256), r"compressed or coded \(format 2\)"),
    "coded": (made(code=7, bits=8), r"compressed or coded \(format 7\)"),
    "64-bit whole numbers": (made(bits=64), "channels of 64 bit"),
    "no channels": (made(channels=0, align=2), "has 0 channels"),
    "slow": (made(rate=4000), "rate of 4000 Hz"),
    "fast": (made(rate=384000), "rate of 384000 Hz"),
    "too long": (made(rate=8000, bits=8, body=b"\x80" * 8000 * 31), "is 31.0 s long; a clip may last 30 s"),
    "cut short": (made(body=b"\1\0" * 24000)[:-24000], "should hold 0.50 s and ends after 0.25 s"),
    "no samples": (made(body=b""), "holds no samples"),
    "no data chunk": (made()[:36], "damaged or did not arrive whole: it holds no samples"),
    "samples before format": (made(before=b"data" + struct.pack("<I", 2) + b"\1\0"), "samples come before their format"),
    "short format": (b"RIFF\0\0\0\0WAVEfmt \4\0\0\0\1\0\1\0" + made()[36:], "format is cut short"),
    "not a number": (NAN, "no numbers"),
    "endless": (by_scipy(np.array([0.1, np.inf])), "no numbers"),
}


@pytest.mark.parametrize("name", FAULTS)
def test_every_fault_is_said_with_file_and_remedy(name):
    data, words = FAULTS[name]
    with pytest.raises(ValueError, match=words) as told:
        read_wav(data, "x.wav")
    text = str(told.value)
    assert text.startswith("x.wav ") and any(remedy in text for remedy in ("Save it", "Cut a part", "Choose a file"))


def test_a_file_cut_anywhere_is_an_error_in_words():
    data = made()
    for end in range(len(data)):
        with pytest.raises(ValueError, match=r"x\.wav"):
            read_wav(data[:end], "x.wav")


def test_the_first_bytes_tell_the_length():
    data = made(rate=8000, bits=8, body=b"\x80" * 8000 * 31)
    with pytest.raises(ValueError, match=r"31\.0 s long"):
        layout(data[:100], len(data), "x.wav")
    assert layout(data[:30], len(data), "x.wav") is None
    assert layout(made()[:60], len(made()), "x.wav").n_frames == 100
