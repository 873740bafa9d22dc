"""Serve the workbench: addresses, the one-time link, start and stop."""

from __future__ import annotations

import ipaddress
import socket
import sys
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

from identify.errors import UsageError
from identify.settings import Settings
from identify.workbench.app import build_app
from identify.workbench.desk import open_desk
from identify.workbench.guard import App
from identify.workbench.jobs import JobRunner
from identify.workbench.pages import Workbench
from identify.workbench.people import list_people
from identify.workbench.sessions import Person, Sessions

if TYPE_CHECKING:
    import uvicorn

LOOPBACK = "127.0.0.1"


@dataclass(frozen=True, slots=True)
class Address:
    """Where the workbench is served."""

    host: str
    port: int
    names: tuple[str, ...] = ()
    """Names other computers use for this one."""

    @property
    def is_loopback(self) -> bool:
        """Whether only this computer can reach it."""
        try:
            return ipaddress.ip_address(self.host).is_loopback
        except ValueError:
            return self.host == "localhost"

    @property
    def hosts(self) -> tuple[str, ...]:
        """Values of the Host header that are ours."""
        own = (LOOPBACK, "localhost", "[::1]") if self.is_loopback else (self.host, *self.names)
        return tuple(f"{name}:{self.port}" for name in own) + (own if self.port == 80 else ())


@dataclass(frozen=True, slots=True)
class Opened:
    """A workbench ready to be served."""

    app: App
    bench: Workbench
    link: str
    """One-time link of whoever started the program; empty on a network address."""


@contextmanager
def open_workbench(
    libraries: Sequence[Path], case_path: Path, settings: Settings, address: Address, *, local_user: str
) -> Iterator[Opened]:
    """A workbench with its background work running, stopped on leaving the block.

    Parameters
    ----------
    libraries : sequence of Path
    case_path : Path
    settings : Settings
    address : Address
    local_user : str
        Name of whoever starts the program.

    Yields
    ------
    Opened

    Raises
    ------
    UsageError
        For a network address without anybody who may sign in, or libraries that make no sense.
    LibraryError
        If a library or the case file cannot be opened.
    """
    with open_desk(libraries, case_path, settings) as desk:
        if not address.is_loopback and not list_people(desk.case):
            raise UsageError(
                "--allow-network", found="nobody who may sign in", expected="at least one person with a password",
                hint="Add people with `ionwitness serve --add-person NAME:ROLE`.",
            )  # fmt: skip
        jobs, sessions = JobRunner(desk), Sessions()
        bench = Workbench(desk, jobs, sessions, f"ionwitness-{address.port}", not address.is_loopback)
        link = ""
        if address.is_loopback:
            # Whoever can read the terminal of this account can write the library anyway: both roles.
            link = f"http://{LOOPBACK}:{address.port}/open/{sessions.new_link(Person(local_user, 'reviewer'))}"
        jobs.start()
        try:
            yield Opened(build_app(bench, address.hosts), bench, link)
        finally:
            jobs.stop()


def make_server(opened: Opened) -> uvicorn.Server:
    """A server of an open workbench, to be run on a listening socket.

    Parameters
    ----------
    opened : Opened

    Returns
    -------
    uvicorn.Server
    """
    import uvicorn

    config = uvicorn.Config(
        opened.app, log_level="warning", access_log=False, server_header=False, date_header=False, proxy_headers=False,
        timeout_keep_alive=30, limit_concurrency=200, h11_max_incomplete_event_size=32_768, ws="none", lifespan="off",
        timeout_graceful_shutdown=5,
    )  # fmt: skip
    return uvicorn.Server(config)


def serve(opened: Opened, listener: socket.socket) -> None:
    """Nothing comes out until the server is told to stop.

    Parameters
    ----------
    opened : Opened
    listener : socket
        Bound already, so that the port is ours before the link is printed.
    """
    # A page in hand waits for its turn beside identifications: short turns keep it quick (default 5 ms).
    sys.setswitchinterval(0.001)
    make_server(opened).run(sockets=[listener])


def bind(host: str, port: int) -> socket.socket:
    """A listening socket.

    Parameters
    ----------
    host : str
    port : int
        0 takes any free one.

    Returns
    -------
    socket

    Raises
    ------
    UsageError
        If the address is not ours or the port is taken.
    """
    family = socket.AF_INET6 if ":" in host else socket.AF_INET
    listener = socket.socket(family, socket.SOCK_STREAM)
    listener.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
    try:
        listener.bind((host, port))
    except OSError as error:
        listener.close()
        said = error.strerror or str(error)
        raise UsageError("--port", found=f"{host}, {port}: {said}", expected="a free port of this computer") from None
    listener.listen(128)
    return listener
