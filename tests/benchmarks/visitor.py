"""A visitor whose browser is another machine's: drags a slider over the page's own connection and paints nothing.

``python tests/benchmarks/visitor.py URL`` speaks the page's protocol (Bokeh's, over one websocket) at the pace of the page's
own script: a move every 40 ms as long as the ones before were answered, "painted" a little after each parcel. It ends with
its standard input.
"""

import asyncio
import json
import re
import sys
import time
from urllib.request import urlopen

from tornado.httpclient import HTTPRequest
from tornado.websocket import websocket_connect

PAINT, EVERY = 0.06, 0.04      # s
GROUP, FIELD = "geometry", "frame_radius"


class Visitor:
    """One connection."""

    def __init__(self, url):
        self.url, self.n, self.answered, self.parcels = url, 0, True, 0
        self.writing = asyncio.Lock()

    async def run(self):
        """Connect, pull the document, drag until cancelled."""
        token = re.search(r'"token":"([^"]+)"', urlopen(self.url).read().decode()).group(1)   # the page's own address
        request = HTTPRequest(self.url.replace("http", "ws", 1) + "ws", headers={"Origin": self.url.rstrip("/")})
        self.socket = await websocket_connect(request, subprotocols=["bokeh", token], max_message_size=2**26)
        await self._message()
        await self._send("PULL-DOC-REQ", {})
        content = None
        while content is None or "doc" not in content:
            content = await self._message()
        self.ids = {name: re.search(r'"id":"(p\d+)","attributes":\{[^{}]*"name":"' + name + '"', content_text(content)).group(1)
                    for name in ("asked", "answers", "parcel")}
        ready = {"kind": "MessageSent", "msg_type": "bokeh_event",
                 "msg_data": {"type": "event", "name": "document_ready", "values": {"type": "map", "entries": []}}}
        await self._send("PATCH-DOC", {"events": [ready]})
        await asyncio.gather(self._hear(), self._drag())

    async def _drag(self):
        position = 0
        while True:
            await asyncio.sleep(EVERY)
            if self.answered:
                self.answered, self.n = False, self.n + 1
                position = 0.4 + 0.002*abs(self.n % 40 - 20)
                move = {"group": GROUP, "name": FIELD, "n": self.n,
                        "place": self.low + position*(self.high - self.low), "released": False}
                await self._ask({"moves": [move]})

    async def _hear(self):
        while True:
            content = await self._message()
            for event in content.get("events", []):
                source = event.get("model", {}).get("id")
                if source == self.ids["answers"]:
                    self.answered = True
                elif source == self.ids["parcel"]:
                    self.parcels += 1
                    count = dict(event["new"]["entries"])["count"][0]
                    asyncio.get_running_loop().call_later(PAINT, self._paint, count)

    def _paint(self, count):
        self.painting = asyncio.ensure_future(self._ask({"painted": count}))

    async def _ask(self, words):
        data = {"type": "map", "entries": [["json", [json.dumps(words)]], ["count", [f"{time.monotonic()}"]]]}
        event = {"kind": "ModelChanged", "model": {"id": self.ids["asked"]}, "attr": "data", "new": data}
        await self._send("PATCH-DOC", {"events": [event]})

    async def _send(self, kind, content):
        header = {"msgid": f"v{time.monotonic_ns()}", "msgtype": kind}
        async with self.writing:          # the three frames of a message stay together
            for part in (header, {}, content):
                await self.socket.write_message(json.dumps(part))

    async def _message(self):
        """Content of the next message; its buffers are left unread."""
        header = json.loads(await self._frame())
        await self._frame()
        content = json.loads(await self._frame())
        for _ in range(2*header.get("num_buffers", 0)):
            await self._frame()
        return content

    async def _frame(self):
        frame = await self.socket.read_message()
        if frame is None:
            raise ConnectionError("the page closed the connection")
        return frame


def content_text(content):
    """The document's JSON without spaces."""
    return json.dumps(content, separators=(",", ":"))


async def main(url):
    """Drag until the standard input ends; say how many results came."""
    visitor = Visitor(url)
    visitor.low, visitor.high = 0.0, 1e4         # of every slider
    dragging = asyncio.ensure_future(visitor.run())
    reading = asyncio.get_running_loop().run_in_executor(None, sys.stdin.read)
    begun = time.monotonic()
    await asyncio.wait([dragging, asyncio.ensure_future(reading)], return_when=asyncio.FIRST_COMPLETED)
    if dragging.done():
        dragging.result()
    print(f"{visitor.parcels/(time.monotonic() - begun):.1f} results a second", flush=True)
    dragging.cancel()


if __name__ == "__main__":
    asyncio.run(main(sys.argv[1]))
