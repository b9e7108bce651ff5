"""Who is let in: raw requests with own and foreign Host and Origin, plain and websocket.

The attack refused here is DNS rebinding: a page elsewhere lets its own name resolve to this machine; its requests carry
that name as Host and Origin (RFC 9112 section 3.2: Host names the target; RFC 6454: Origin names the asking page).
"""

import socket
import threading

import pytest

from app.server import CannotListen, Hosts, Served, free_port


@pytest.fixture(scope="module")
def served():
    """A served design in a thread of its own."""
    from engine.design import Design
    started, box = threading.Event(), []

    def serve():
        served = Served(Design(), "127.0.0.1", None, 5600)
        box.append(served)
        served.server.start()
        served.loop.add_callback(started.set)
        served.loop.start()
        served.close()

    thread = threading.Thread(target=serve)
    thread.start()
    assert started.wait(30)
    yield box[0]
    box[0].loop.add_callback(box[0].loop.stop)
    thread.join(30)


def ask(port, *headers, path="/"):
    """Status code of a raw request with these header lines."""
    with socket.create_connection(("127.0.0.1", port), timeout=30) as connection:
        lines = [f"GET {path} HTTP/1.1", *headers, "Connection: close", "", ""]
        connection.sendall("\r\n".join(lines).encode())
        return int(connection.recv(64).split()[1])


WEBSOCKET = ("Upgrade: websocket", "Connection: Upgrade", "Sec-WebSocket-Version: 13",
             "Sec-WebSocket-Key: dGhlIHNhbXBsZSBub25jZQ==", "Sec-WebSocket-Protocol: bokeh, none")


@pytest.mark.parametrize("host", ["127.0.0.1", "localhost", "LOCALHOST"])
def test_own_hosts_are_served(served, host):
    assert ask(served.port, f"Host: {host}:{served.port}") == 200
    assert ask(served.port, f"Host: {host}:{served.port}", f"Origin: http://{host}:{served.port}") == 200


@pytest.mark.parametrize("path", ["/", "/ws", "/static/js/bokeh.min.js", "/autoload.js", "/metadata", "/nowhere"])
@pytest.mark.parametrize("host", [
    "evil.example:{port}", "evil.example", "127.0.0.1", "127.0.0.1:1", "localhost.evil.example:{port}",
    "127.0.0.1.evil.example:{port}", "192.0.2.1:{port}", ""])
def test_foreign_hosts_are_refused_everywhere(served, host, path):
    assert ask(served.port, f"Host: {host.format(port=served.port)}", path=path) == 403


@pytest.mark.parametrize("origin", [
    "http://evil.example", "http://evil.example:{port}", "https://127.0.0.1:{port}", "null",
    "http://localhost:{port}"])
def test_foreign_origins_are_refused(served, origin):
    """Also one of our own names, if it is not the one the request was sent to."""
    host, origin = f"Host: 127.0.0.1:{served.port}", f"Origin: {origin.format(port=served.port)}"
    assert ask(served.port, host, origin) == 403
    assert ask(served.port, host, origin, *WEBSOCKET, path="/ws") == 403


def test_a_foreign_host_with_the_same_foreign_origin_is_refused_a_websocket(served):
    """What a rebinding page sends; Bokeh alone would accept it."""
    foreign = f"evil.example:{served.port}"
    assert ask(served.port, f"Host: {foreign}", f"Origin: http://{foreign}", *WEBSOCKET, path="/ws") == 403


def test_two_host_headers_are_refused(served):
    own = f"Host: 127.0.0.1:{served.port}"
    assert ask(served.port, own, "Host: evil.example") in (400, 403)


def test_an_own_websocket_without_a_session_gets_past_the_gate(served):
    own = f"127.0.0.1:{served.port}"
    assert ask(served.port, f"Host: {own}", f"Origin: http://{own}", *WEBSOCKET, path="/ws") != 403


@pytest.mark.parametrize(("address", "netloc", "allowed"), [
    ("127.0.0.1", "127.0.0.1:5480", True), ("127.0.0.1", "[::1]:5480", False), ("::1", "[::1]:5480", True),
    ("192.0.2.7", "192.0.2.7:5480", True), ("192.0.2.7", "127.0.0.1:5480", False),
    ("192.0.2.7", "evil.example:5480", False),
    ("0.0.0.0", "192.0.2.7:5480", True), ("0.0.0.0", "localhost:5480", True), ("0.0.0.0", "evil.example:5480", False),
    ("::", "[2001:db8::1]:5480", True), ("127.0.0.1", "", False), ("127.0.0.1", ":5480", False)])
def test_which_hosts_are_own(address, netloc, allowed):
    assert Hosts(address, 5480).allows(netloc) is allowed


def test_on_port_80_a_host_needs_no_port():
    assert Hosts("127.0.0.1", 80).allows("127.0.0.1")
    assert Hosts("::1", 80).allows("[::1]")


def test_the_next_free_port_is_taken_and_said(served, design):
    assert free_port("127.0.0.1", served.port) == served.port + 1
    other = Served(design, "127.0.0.1", None, served.port)
    try:
        assert other.announcement()[0] == f"Port {served.port} is taken: using {other.port}."
    finally:
        other.close()


def test_a_given_port_that_is_taken_is_refused(served, design):
    with pytest.raises(CannotListen, match=f"port {served.port} at 127.0.0.1 is taken"):
        Served(design, "127.0.0.1", served.port)


def test_an_address_of_another_machine_is_refused(design):
    with pytest.raises(CannotListen, match="not an address of this machine"):
        Served(design, "192.0.2.7")


def test_loopback_says_nothing_of_exposure_and_others_do(served, design):
    assert not any("Exposed" in line for line in served.announcement())
    exposed = Served(design, "0.0.0.0", None, 5700)
    try:
        words = " ".join(exposed.announcement())
    finally:
        exposed.close()
    assert "anyone who can reach" in words
    assert "no login" in words
    assert "not encrypted" in words
    assert exposed.url.startswith("http://127.0.0.1:")
