"""The life of the server: folder, socket, browser, first picture, end."""

import contextlib
import importlib
import shutil
import signal
import socket
import threading
import webbrowser
from collections.abc import Callable
from pathlib import Path
from types import FrameType
from typing import TYPE_CHECKING, Any

import uvicorn

from pinsim.errors import OutputError
from pinsim.live import memory
from pinsim.live.app import Server
from pinsim.live.folder import private_folder
from pinsim.live.guard import Guard, Keys
from pinsim.live.refused import RefusedError

if TYPE_CHECKING:
    from pinsim.live.designs import Given
    from pinsim.live.state import State
    from pinsim.live.studio import Studio

HOST = "127.0.0.1"
_ENDS = ("SIGINT", "SIGTERM", "SIGHUP")


def listening(port: int) -> socket.socket:
    """Return a socket on this machine's own address; port 0 is a free one. OutputError when taken."""
    # With its protocol named asyncio sends small answers at once; else each waits 40 ms for company.
    found = socket.socket(socket.AF_INET, socket.SOCK_STREAM, socket.IPPROTO_TCP)
    # An address that was served a moment ago can be served again; never one that still is.
    found.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
    try:
        found.bind((HOST, port))
    except (OSError, OverflowError) as problem:
        found.close()
        reason = getattr(problem, "strerror", None) or str(problem)
        raise OutputError(
            f"port {port} cannot be served ({reason}); give another, or leave --port out."
        ) from None
    found.listen(128)
    return found


class _Lazy:
    """The studio, made by whoever first needs it; the same for all."""

    def __init__(self, make: "Callable[[], Studio]") -> None:
        self._make = make
        self._lock = threading.Lock()
        self._made: Studio | None = None

    def __call__(self) -> "Studio":
        with self._lock:
            if self._made is None:
                self._made = self._make()
            return self._made


def serve(
    given: "Callable[[], Given]",
    *,
    port: int = 0,
    browser: bool = True,
    say: Callable[[str], None] = print,
) -> None:
    """Serve the page until Ctrl-C or a signal ends it; all that it kept is gone then.

    given : makes what the command line was given, as that loads a lot. say : prints a line.
    Raises OutputError when the port is taken, and what `given` raises, before a browser is opened.
    """
    server_socket = listening(port)
    memory.keep_together()
    folder = private_folder()
    server: Server | None = None
    try:
        port = server_socket.getsockname()[1]
        keys = Keys()
        studio = _Lazy(lambda: _studio(folder, given))
        server = Server(studio)
        # While the browser starts, everything is loaded and the first picture is drawn.
        warm = threading.Thread(target=_warm, args=(server, studio), daemon=True)
        warm.start()
        say(f"pinsim live: http://{HOST}:{port}/open?token={keys.token}")
        say(
            "Only this machine is answered. Ctrl-C ends it, and forgets the photos dropped on the page."
        )
        if browser:
            address = f"http://{HOST}:{port}/open?once={keys.new_code()}"
            threading.Thread(target=_open, args=(address, say), daemon=True).start()
        _until_ended(Guard(server.app, keys=keys, port=port), server_socket)
    finally:
        server_socket.close()
        if server is not None:
            server.end()
        shutil.rmtree(folder, ignore_errors=True)


def _studio(folder: Path, given: "Callable[[], Given]") -> "Studio":
    from pinsim.live.studio import Studio

    return Studio(folder, given())


def _warm(server: Server, studio: _Lazy) -> None:
    """Draw the first picture before it is asked for; what is wrong is told when it is."""
    with contextlib.suppress(RefusedError):
        made = studio()
        state = made.first_state()
        # A photo is decoded while the renderer is loaded.
        reading = threading.Thread(target=_read, args=(made, state), daemon=True)
        reading.start()
        importlib.import_module("pinsim.live.pictures")
        reading.join()
        ask = made.picture_asked({"state": state.settled})
        server.pictures.take(("warm", "warm"), lambda check: made.draw(*ask, check))
        importlib.import_module("pinsim.live.figures")


def _read(studio: "Studio", state: "State") -> None:
    with contextlib.suppress(RefusedError):
        studio.shelf.scene(state.place)


def _open(address: str, say: Callable[[str], None]) -> None:
    try:
        opened = webbrowser.open(address)
    except webbrowser.Error:
        opened = False
    if not opened:
        say("No browser could be started; open the address above in one.")


def _until_ended(app: Any, server_socket: socket.socket) -> None:
    config = uvicorn.Config(
        app,
        log_config=None,
        access_log=False,
        lifespan="off",
        ws="none",
        timeout_graceful_shutdown=2,
        timeout_keep_alive=30,
        limit_concurrency=400,
        h11_max_incomplete_event_size=32 << 10,
        server_header=False,
        date_header=False,
    )
    server = uvicorn.Server(config)
    # It would catch signals and send them again before anything could be cleaned up.
    server.capture_signals = contextlib.nullcontext  # type: ignore[assignment, method-assign]

    def end(number: int, frame: FrameType | None) -> None:
        server.force_exit = server.should_exit
        server.should_exit = True

    before = {}
    for name in _ENDS:
        number = getattr(signal, name, None)  # not every system has all of them
        if number is not None and threading.current_thread() is threading.main_thread():
            before[number] = signal.signal(number, end)
    try:
        server.run(sockets=[server_socket])
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)
