"""The server's side of identifying: one process that is kept, because opening a library takes longer than searching it."""

from __future__ import annotations

import json
import os
import subprocess
import sys
import tempfile
import threading
from collections.abc import Mapping
from contextlib import suppress
from pathlib import Path
from typing import IO, Any

from identify import errors
from identify.errors import IonwitnessError
from identify.records import SpectrumRecord
from identify.settings import Settings
from identify.workbench.drawn_query import DrawnQuery, drawn_from_dict
from identify.workbench.record_json import record_to_dict
from identify.workbench.stored import settings_to_text

MAX_LINE_BYTES = 64 * 2**20


class Broken(IonwitnessError):
    """The process ended by itself: a bug, or no memory."""


class IdentifierProcess:
    """One process that identifies and draws, started when it is first needed; one order at a time.

    Parameters
    ----------
    libraries : sequence of Path
    case_path : Path
    settings : Settings
        Those of a query for which no others are given.
    """

    def __init__(self, libraries: tuple[Path, ...], case_path: Path, settings: Settings) -> None:
        text = settings_to_text(settings.as_dict())
        self._orders = {"libraries": [str(path) for path in libraries], "case": str(case_path), "settings": text}
        self._lock = threading.Lock()
        self._process: subprocess.Popen[bytes] | None = None
        self._errors: IO[bytes] | None = None
        self._is_over = False

    def identify(self, record: SpectrumRecord, number: int, settings: Settings | None = None) -> dict[str, Any]:
        """The result contract of one record against the libraries as they are now.

        Parameters
        ----------
        record : SpectrumRecord
        number : int
        settings : Settings, optional
            Those of the workbench by default.

        Returns
        -------
        dict

        Raises
        ------
        SpectrumError
            If the spectrum cannot be searched.
        Broken
            If the process ended; the next call starts another.
        """
        text = settings_to_text(settings.as_dict()) if settings else ""
        order = {"record": record_to_dict(record), "number": number, "settings": text}
        document: dict[str, Any] = self._ask(order)["document"]
        return document

    def draw(self, query_id: int, result_id: int) -> DrawnQuery:
        """The parts of a query's page for one of its results.

        Parameters
        ----------
        query_id, result_id : int

        Returns
        -------
        DrawnQuery

        Raises
        ------
        LibraryError
            See `identify.workbench.drawn_query.draw_query`.
        Broken
            If the process ended; the next call starts another.
        """
        return drawn_from_dict(self._ask({"draw": [query_id, result_id]})["drawn"])

    def end(self) -> None:
        """End the process; nothing is asked of it any more."""
        self._is_over = True
        process = self._process
        if process is not None:
            process.kill()
        with self._lock:
            self._forget()

    def _ask(self, order: Mapping[str, Any]) -> dict[str, Any]:
        text = json.dumps(order, separators=(",", ":"), allow_nan=False).encode() + b"\n"
        with self._lock:
            process = self._start()
            assert process.stdin is not None and process.stdout is not None
            try:
                process.stdin.write(text)
                process.stdin.flush()
                answer = process.stdout.readline(MAX_LINE_BYTES)
            except BrokenPipeError:
                answer = b""
            if not answer.endswith(b"\n"):
                raise Broken(
                    "identification", found=self._forget(), expected="a result",
                    hint="What was found before is kept. This is a bug, please report it.",
                )  # fmt: skip
        told: dict[str, Any] = json.loads(answer)
        if "fault" in told:
            fields = told["fault"]
            kind: type[IonwitnessError] = getattr(errors, fields.pop("kind"), IonwitnessError)
            raise kind(fields.pop("what"), **fields)
        return told

    def _start(self) -> subprocess.Popen[bytes]:
        if self._is_over:
            raise Broken("identification", found="the workbench is ending", expected="one that goes on")
        if self._process is None or self._process.poll() is not None:
            self._forget()
            # One thread: what is done here must leave the other cores to whoever waits for a page.
            environment = {
                **os.environ,
                "OMP_NUM_THREADS": "1",
                "OPENBLAS_NUM_THREADS": "1",
                "PYTHONIOENCODING": "utf-8",
            }
            environment["PYTHONPATH"] = os.pathsep.join(path for path in sys.path if path)
            self._errors = tempfile.TemporaryFile()  # noqa: SIM115  (closed by _forget)
            self._process = subprocess.Popen(
                [sys.executable, "-m", "identify.workbench.identifier"],
                stdin=subprocess.PIPE, stdout=subprocess.PIPE, stderr=self._errors, env=environment, close_fds=True,
            )  # fmt: skip
            assert self._process.stdin is not None
            self._process.stdin.write(json.dumps(self._orders).encode() + b"\n")
        return self._process

    def _forget(self) -> str:
        """How the process ended, which is over afterwards."""
        process, said = self._process, self._errors
        self._process = self._errors = None
        if process is None or said is None:
            return ""
        process.kill()
        code = process.wait()
        for pipe in (process.stdin, process.stdout):
            assert pipe is not None
            with suppress(BrokenPipeError):  # what was not written is of no use to a process that has ended
                pipe.close()
        said.seek(0, os.SEEK_END)
        said.seek(max(0, said.tell() - 4000))
        last = said.read().decode("utf-8", "replace").strip().splitlines()
        said.close()
        return f"a process that ended with code {code}" + (f" ({last[-1][:200]})" if last else "")
