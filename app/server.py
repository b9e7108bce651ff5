"""Bind, admit, serve: one session per visitor, on this machine only unless told otherwise."""

import errno
import ipaddress
import os
import re
import signal
import socket
import threading
import webbrowser

from panel.io.server import get_server
from tornado.ioloop import IOLoop
from tornado.routing import Matcher, Rule
from tornado.web import RequestHandler

from app import main

PORTS_TRIED = 20


class CannotListen(OSError):
    """No port to listen on at that address; the message says which were tried and what to do."""


class Served:
    """One design, served on one address and port.

    Parameters
    ----------
    design : engine.design.Design
        What a new visitor sees first.
    address : str
        Address to listen on, in numbers.
    port : int or None
        None: `first_port` or the next free one.
    first_port : int
        Where the search for a free port begins.

    Raises
    ------
    CannotListen
        If the address is not this machine's, or the port (or each port tried) is taken.
    """

    def __init__(self, design, address="127.0.0.1", port=None, first_port=5480):
        self.address = address
        self.port = port or free_port(address, first_port)
        self.moved_from = first_port if port is None and self.port != first_port else None
        self.loop = IOLoop()
        hosts = Hosts(address, self.port)
        try:
            self.server = get_server(
                {"/": lambda: main.page(design)}, port=self.port, address=address, loop=self.loop,
                websocket_origin=hosts.origins(), title=main.PRODUCT, show=False, start=False, verbose=False)
        except OSError as error:
            raise CannotListen(_why_not(error, address, self.port)) from None
        admit(self.server._tornado, hosts)

    @property
    def url(self):
        """Where a browser on this machine finds the page."""
        ip = ipaddress.ip_address(self.address)
        host = {4: "127.0.0.1", 6: "::1"}[ip.version] if ip.is_unspecified else self.address
        return f"http://{_bracketed(host)}:{self.port}/"

    def run(self, browser=True):
        """Serve until SIGINT or SIGTERM; the exit code.

        Parameters
        ----------
        browser : bool
            Whether to open the page in the default browser.
        """
        for name in (signal.SIGINT, signal.SIGTERM):
            signal.signal(name, lambda *_: self.loop.add_callback_from_signal(self.loop.stop))
        for line in self.announcement():
            print(line, flush=True)
        self.server.start()
        if browser:
            threading.Thread(target=webbrowser.open, args=(self.url,), daemon=True).start()
        self.loop.start()
        self.close()
        print("Ended.", flush=True)
        return 0

    def announcement(self):
        """What the terminal says before serving, line by line."""
        lines = []
        if self.moved_from:
            lines.append(f"Port {self.moved_from} is taken: using {self.port}.")
        lines.append(f"{main.PRODUCT} is at {self.url}   (Ctrl-C ends it)")
        if not ipaddress.ip_address(self.address).is_loopback:
            lines.append(
                f"Exposed: anyone who can reach {self.address} port {self.port} can use this page, load it with work "
                "and read the design it starts with. There is no login, and the connection is not encrypted.")
        return lines

    def close(self):
        """Stop listening and end the sessions."""
        self.server.stop(wait=False)


class Hosts:
    """Which names a request may call this server by.

    A page elsewhere can point its own name at this machine (DNS rebinding) but cannot make the browser send a number as
    Host: so numbers are trusted where they are ours, and names only if they are this machine's.
    """

    def __init__(self, address, port):
        self.port = port
        ip = ipaddress.ip_address(address)
        self.any_number = ip.is_unspecified
        self.names = {address}
        if ip.is_loopback or ip.is_unspecified:
            self.names |= {"localhost", "127.0.0.1" if ip.version == 4 else "::1"}
        if not ip.is_loopback:
            self.names.add(socket.gethostname().lower())

    def allows(self, netloc):
        """Whether ``host:port`` is one of this server's own."""
        host, _, port = netloc.lower().rpartition(":") if re.search(r":\d+$", netloc) else (netloc.lower(), "", "80")
        if not host or port != str(self.port):
            return False
        host = host.strip("[]")
        return host in self.names or (self.any_number and _is_number(host))

    def origins(self):
        """Origins for Bokeh's own websocket check, which knows neither ranges nor IPv6: there `admit` alone checks."""
        known = not self.any_number and not any(":" in name for name in self.names)
        return sorted(f"{name}:{self.port}" for name in self.names) if known else ["*"]


class Foreign(Matcher):
    """Matches every request whose Host or Origin is not this server's."""

    def __init__(self, hosts):
        self.hosts = hosts

    def match(self, request):
        """Route parameters ({}) for a foreign request, None for one of our own."""
        host = request.headers.get_list("Host")
        if len(host) != 1 or not self.hosts.allows(host[0]):
            return {}
        same = f"http://{host[0].lower()}"
        foreign = any(origin.lower() != same for origin in request.headers.get_list("Origin"))
        return {} if foreign else None


class Refuse(RequestHandler):
    """Answers a foreign request, plain or websocket, with 403."""

    def prepare(self):
        """Refuse before any method is looked at."""
        self.set_status(403)
        self.set_header("Content-Type", "text/plain; charset=utf-8")
        self.finish("Refused: the request names another host than this server. Open the address it printed.\n")


def admit(application, hosts):
    """Put the check of Host and Origin before every route of a Tornado application."""
    router = application.default_router
    router.rules.insert(0, router.process_rule(Rule(Foreign(hosts), Refuse)))


def free_port(address, first):
    """The first port from `first` on that nothing listens on; CannotListen if none of the next few is free."""
    family = socket.AF_INET6 if ":" in address else socket.AF_INET
    for port in range(first, first + PORTS_TRIED):
        with socket.socket(family, socket.SOCK_STREAM) as probe:
            if os.name == "posix":
                probe.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
            try:
                probe.bind((address, port))
            except OSError as error:
                if error.errno != errno.EADDRINUSE:
                    raise CannotListen(_why_not(error, address, port)) from None
            else:
                return port
    raise CannotListen(f"ports {first} to {first + PORTS_TRIED - 1} at {address} are all taken. "
                       "Give a free one with --port.")


def _why_not(error, address, port):
    """The message for an address and port that cannot be listened on."""
    if error.errno == errno.EADDRINUSE:
        return (f"port {port} at {address} is taken. Give another with --port, "
                "or leave --port out to take the next free one.")
    if error.errno == errno.EACCES:
        return f"port {port} needs rights this user does not have. Give one above 1023 with --port."
    if error.errno == errno.EADDRNOTAVAIL:
        return f"{address} is not an address of this machine. Give one of its own with --address, or leave it out."
    return f"cannot listen at {address} port {port}: {error.strerror}. Try another --address or --port."


def _is_number(host):
    """Whether a host is an address in numbers."""
    try:
        ipaddress.ip_address(host)
    except ValueError:
        return False
    return True


def _bracketed(host):
    """The host as an address line writes it."""
    return f"[{host}]" if ":" in host else host
