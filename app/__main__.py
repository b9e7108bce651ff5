"""Command line: serve the page for one design file, or for the bundled sample."""

import argparse
import ipaddress
import os
import sys
import threading
from importlib import resources

DEFAULT_PORT = 5480
DEFAULT_SAMPLE = "bench-back.toml"
SAMPLES = "sample_designs"


def main(argv=None):
    """Serve the page until interrupted.

    Parameters
    ----------
    argv : list of str or None
        Arguments without the program's name; None takes the process's own.

    Returns
    -------
    int
        Exit code: 0 after a clean end, 2 for a command or a design that cannot be served.
    """
    options = parser().parse_args(argv)
    # BLAS reads these once, when numpy is first imported: one thread, the two cores belong to two visitors.
    for name in ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS"):
        os.environ.setdefault(name, "1")
    # Imported only now: --help and a mistyped option need no numerics and no server.
    import engine
    from app import server
    from engine.designfile import load
    from engine.errors import InvalidDesign

    try:
        with resources.as_file(sample_file(DEFAULT_SAMPLE)) as sample:
            design = load(sample if options.file is None else options.file)
    except InvalidDesign as error:
        return _refuse(str(error))
    except OSError as error:
        return _refuse(f"{options.file}: cannot be read ({error.strerror}). Give the path of a design file.")
    try:
        served = server.Served(design, options.address, options.port, DEFAULT_PORT)
    except server.CannotListen as error:
        return _refuse(str(error))
    threading.Thread(target=engine.prepare, name="tables", daemon=True).start()
    return served.run(browser=not options.no_browser)


def parser():
    """The command's options."""
    command = argparse.ArgumentParser(
        prog="elastovox", description="Explore the design of an elastomer-film loudspeaker in the browser.")
    command.add_argument("file", metavar="FILE", nargs="?", help="design file (TOML); default: the bench-back sample")
    command.add_argument("--port", type=_port, help=f"port to listen on (default {DEFAULT_PORT}, or the next free one)")
    command.add_argument("--address", type=_address, default="127.0.0.1",
                         help="address to listen on (default 127.0.0.1: this machine only)")
    command.add_argument("--no-browser", action="store_true", help="do not open the browser")
    return command


def sample_file(name):
    """Bundled design file of that name, the same in a checkout and in an installed wheel."""
    return resources.files(SAMPLES).joinpath(name)


def _port(text):
    """A port number, or argparse's own kind of complaint."""
    if not text.isascii() or not text.isdigit() or not 0 < int(text) < 65536:
        raise argparse.ArgumentTypeError(f"{text!r} is no port: give a whole number from 1 to 65535")
    return int(text)


def _address(text):
    """An address of this machine in numbers; names are left out, they may resolve to more than one."""
    if text == "localhost":
        return "127.0.0.1"
    try:
        return str(ipaddress.ip_address(text))
    except ValueError:
        raise argparse.ArgumentTypeError(
            f"{text!r} is no address: give one such as 127.0.0.1, ::1 or 0.0.0.0") from None


def _refuse(message):
    """Say why nothing is served; the exit code."""
    print(f"elastovox: {message}", file=sys.stderr)
    return 2


if __name__ == "__main__":
    sys.exit(main())
