"""A workbench on a real socket, and clients that behave like a browser at its address."""

from __future__ import annotations

import socket
import threading
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import httpx

import identify
from identify.settings import Settings
from identify.workbench.desk import Desk
from identify.workbench.people import set_person
from identify.workbench.server import Address, bind, make_server, open_workbench
from identify.workbench.sessions import Sessions

ROOT = Path(identify.__file__).resolve().parent.parent
DEMO = ROOT / "fixtures" / "demo" / "unknowns"
PASSWORD = "a long enough password"
ACETONE = "15 34, 27 8, 39 4, 42 7, 43 100, 44 3, 58 38, 59 1.5"
"""An invented spectrum of acetone's kind."""


def wait_until(condition: Callable[[], object], limit_s: float = 240.0) -> None:
    """Return once a condition holds; a limit that only a program that stands still can reach."""
    end = time.monotonic() + limit_s
    while not condition():
        assert time.monotonic() < end, "it never came"
        time.sleep(0.02)


@dataclass
class Bench:
    """A running workbench."""

    port: int
    link: str
    desk: Desk
    sessions: Sessions
    client: httpx.Client = field(init=False)
    clients: list[httpx.Client] = field(default_factory=list)

    def __post_init__(self) -> None:
        self.client = self.new_client()
        assert self.client.get(self.link).status_code == 303

    @property
    def origin(self) -> str:
        """Our own origin."""
        return f"http://127.0.0.1:{self.port}"

    def new_client(self, cookies: dict[str, str] | None = None) -> httpx.Client:
        """A client without a session, or with cookies it has from somewhere."""
        headers = {"origin": self.origin}
        client = httpx.Client(base_url=self.origin, headers=headers, cookies=cookies, timeout=60.0, trust_env=False)
        self.clients.append(client)
        return client

    def person(self, name: str, role: str) -> httpx.Client:
        """A client signed in by name and password."""
        set_person(self.desk.case, name, role, PASSWORD, self.desk.now())
        client = self.new_client()
        answer = client.post("/sign-in", data={"name": name, "password": PASSWORD})
        assert answer.status_code == 303, answer.text
        assert answer.headers["location"] == "/"
        return client

    def count_queries(self) -> int:
        """How many queries are on the bench."""
        return sum(self.client.get("/api/work-list").json()["counts"].values())

    def wait(self) -> list[dict[str, Any]]:
        """Jobs once all of them are over."""
        wait_until(lambda: not self.client.get("/api/jobs").json()["is_busy"])
        return list(self.client.get("/api/jobs").json()["jobs"])

    def upload(self, *files: tuple[str, bytes]) -> list[dict[str, Any]]:
        """Jobs after these files were taken."""
        answer = self.client.post("/api/uploads", files=[("files", file) for file in files])
        assert answer.status_code == 201, answer.text
        return self.wait()

    def upload_demo(self, n_files: int) -> None:
        """The first unknowns of the demo, identified."""
        files = [(path.name, path.read_bytes()) for path in sorted(DEMO.iterdir())[:n_files]]
        assert all(job["state"] == "done" for job in self.upload(*files))

    def paste(self, peaks: str = ACETONE, name: str = "pasted") -> int:
        """Number of the query made of pasted peaks."""
        answer = self.client.post("/api/pasted", data={"peaks": peaks, "name": name})
        assert answer.status_code == 201, answer.text
        self.wait()
        return int(self.client.get("/api/work-list").json()["queries"][0]["id"])

    def query(self, query_id: int) -> dict[str, Any]:
        """JSON twin of a query's page."""
        answer = self.client.get(f"/api/queries/{query_id}")
        assert answer.status_code == 200, answer.text
        return dict(answer.json())

    def decide(self, query_id: int, client: httpx.Client | None = None, **fields: Any) -> httpx.Response:
        """Answer to a decision on the latest result of a query."""
        told = self.query(query_id)
        seen = told["decisions"][-1]["seq"] if told["decisions"] else 0
        form = {"result": told["query"]["result_id"], "seen": seen, **fields}
        return (client or self.client).post(f"/api/queries/{query_id}/decisions", data=form)


@contextmanager
def running_bench(folder: Path, listener: socket.socket | None = None) -> Iterator[Bench]:
    """A workbench on the library in a folder, served from a thread, on a port of its own or one that is held already."""
    listener = listener or bind("127.0.0.1", 0)
    address = Address("127.0.0.1", listener.getsockname()[1])
    library, case = folder / "lab.ionlib", folder / "lab.ioncase"
    with listener, open_workbench([library], case, Settings(), address, local_user="Ada") as opened:
        server = make_server(opened)
        thread = threading.Thread(target=server.run, kwargs={"sockets": [listener]}, daemon=True)
        thread.start()
        wait_until(lambda: server.started)
        bench = Bench(address.port, opened.link, opened.bench.desk, opened.bench.sessions)
        try:
            yield bench
        finally:
            for client in bench.clients:
                client.close()
            server.should_exit = True
            thread.join(timeout=60.0)
            assert not thread.is_alive(), "the server does not end"
