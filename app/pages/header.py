"""The slim header every page shares: names, hold, undo, redo, open, save, link, samples."""

import asyncio
import base64
import binascii
from pathlib import Path
from typing import ClassVar

import panel as pn
import param
from panel.custom import JSComponent

from app.session import PAGES, samples

BESIDE = Path(__file__).parent.parent
BUSY_AFTER = 0.3                  # s: what is computed sooner is not said to be computing
KEPT_AFTER = 1.0                  # s of rest after which the address carries the design: a reload loses nothing
LARGEST_FILE = 64 * 1024          # bytes; the browser looks before it sends, so that the connection lives


class Header(JSComponent):
    """Names and actions; what it is told goes to the session's state.

    Parameters
    ----------
    session : app.session.Session
    product : str
        Name of the product.
    """

    product = param.String()
    design_name = param.String()
    samples = param.List(doc="(file name, words) of the bundled designs")
    pages = param.List(default=list(PAGES), doc="names of the pages")
    page = param.String(doc="the page shown")
    held = param.Boolean()
    can_undo = param.Boolean()
    can_redo = param.Boolean()
    dirty = param.Boolean()
    busy = param.Boolean()

    _esm = BESIDE / "header.js"
    _stylesheets: ClassVar = [(BESIDE / "header.css").read_text(encoding="utf-8")]

    def __init__(self, session, product):
        self._session, self._later, self._keeping = session, None, None
        super().__init__(product=product, samples=samples(), margin=0, sizing_mode="stretch_width", **self._seen())
        session.state.param.watch(self._show, ["design", "held", "can_undo", "can_redo", "dirty"])
        session.param.watch(self._show, "page")
        session.param.watch(self._show_busy, "busy")
        session.state.param.watch(self._keep, "design")
        session.on_close(self._rest)

    def _seen(self):
        """What the header shows of the session."""
        state = self._session.state
        return {"design_name": state.design.name, "page": self._session.page, "held": state.held is not None,
                "can_undo": state.can_undo, "can_redo": state.can_redo, "dirty": state.dirty}

    def _show(self, *_):
        """Show the session as it is now."""
        self.param.update(**self._seen())

    def _show_busy(self, *_):
        """Say that something is being computed, once it takes long enough to be noticed."""
        if self._later is not None:
            self._later.cancel()
            self._later = None
        if self._session.busy:
            self._later = asyncio.get_running_loop().call_later(BUSY_AFTER, self._say_busy, pn.state.curdoc)
        elif self.busy:
            self.busy = False

    def _say_busy(self, document):
        """The time is over."""
        if document is None:
            self.busy = self._session.busy
        else:
            document.add_next_tick_callback(lambda: self.param.update(busy=self._session.busy))

    def _keep(self, *_):
        """Put the design into the page's address, once nothing moves any more."""
        self._rest()
        document = pn.state.curdoc
        if document is not None:
            loop = asyncio.get_running_loop()
            self._keeping = loop.call_later(KEPT_AFTER, document.add_next_tick_callback, self._send_address)

    def _send_address(self):
        """The address that opens the design as it is now."""
        self._send_msg({"address": self._session.state.link()})

    def _rest(self):
        """Nothing is to be kept any more, or something newer."""
        if self._keeping is not None:
            self._keeping.cancel()
            self._keeping = None

    def _handle_msg(self, message):
        """Do what the browser asks; a refusal (InvalidDesign is a ValueError) is told in words."""
        try:
            self._do(message)
        except ValueError as error:
            tell(str(error))
            self.param.trigger("design_name")

    def _do(self, message):
        """One request of the browser."""
        state = self._session.state
        if "rename" in message:
            state.rename(message["rename"])
        elif "page" in message:
            self._session.page = message["page"]
        elif "too_large" in message:
            tell(f"{message['file']} has {message['too_large'] / 1024:.0f} kB; a design file has at most "
                 f"{LARGEST_FILE // 1024} kB. Choose a design file, as “save” writes it.")
        elif "content" in message:
            state.open_file(_bytes(message), message["file"])
        elif "sample" in message:
            state.open_sample(message["sample"])
        else:
            self._act(message["act"])

    def _act(self, act):
        """One of the header's buttons, or its key."""
        state = self._session.state
        if act == "save":
            filename, text = state.save()
            self._send_msg({"download": {"filename": filename, "text": text}})
        elif act == "link":
            self._send_msg({"link": "d=" + state.link()})
        else:
            {"hold": self._session.hold, "undo": state.undo, "redo": state.redo}[act]()


def tell(text):
    """Show a refusal on the page until it is closed."""
    if pn.state.notifications is not None:
        pn.state.notifications.error(text, duration=0)


def _bytes(message):
    """The bytes of a file the browser sent; a size over the limit is cut by one byte more, which the reader refuses."""
    try:
        return base64.b64decode(message["content"], validate=True)[:LARGEST_FILE + 1]
    except (binascii.Error, TypeError):
        raise ValueError(f"{message['file']} did not arrive whole. Open it again.") from None
