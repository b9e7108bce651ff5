"""A person's WAV file, as it comes in pieces."""

import base64
import binascii

from app import wav

LARGEST = 48 * 2**20     # bytes: 30 s of two channels at 192 kHz, 32 bit
PIECE = 384 * 1024       # bytes the browser sends at a time, far below what the connection takes


class Upload:
    """A file under way. data: what has come of it; name; size: bytes of the whole."""

    def __init__(self):
        self.name, self.size, self.data = "", 0, bytearray()

    def take(self, piece):
        """Add a piece, the first of which begins another file; whether the file is complete.

        Parameters
        ----------
        piece : dict
            name, size (bytes of the file), at (bytes before the piece), content (base64).

        Raises
        ------
        ValueError
            If the file cannot be a clip, as far as can be said by now, or did not arrive whole.
        """
        if piece["at"] == 0:
            self.name, self.size, self.data = str(piece["name"]), int(piece["size"]), bytearray()
        content = self._content(piece)
        if len(self.data) != piece["at"] or len(content) > PIECE or len(self.data) + len(content) > self.size:
            raise self._not_whole()
        self.data += content
        if piece["at"] == 0:
            self._look()
        if len(self.data) < self.size and len(content) < PIECE:
            raise self._not_whole()
        return len(self.data) == self.size

    def _look(self):
        """Refuse what the first piece shows to be no clip, before the rest is sent."""
        wav.layout(bytes(self.data), self.size, self.name)
        if self.size > LARGEST:
            raise ValueError(f"{self.name} has {self.size / 2**20:.0f} MiB; a file may have {LARGEST // 2**20} MiB. Save it "
                             "with fewer channels, or at 48 kHz and 16 bit.")

    def _content(self, piece):
        try:
            return base64.b64decode(piece["content"], validate=True)
        except (binascii.Error, TypeError):
            raise self._not_whole() from None

    def _not_whole(self):
        return ValueError(f"{self.name or 'The file'} did not arrive whole. Choose it again.")
