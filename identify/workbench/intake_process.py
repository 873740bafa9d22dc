"""The server's side of reading an upload: start the limited process, take its lines, end it when asked or when it is late."""

from __future__ import annotations

import json
import os
import subprocess
import sys
import tempfile
import threading
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import IO, Any

from identify.errors import InputError

MAX_LINE_BYTES = 32 * 2**20
"""A spectrum of 100,000 peaks stays below."""


@dataclass(frozen=True, slots=True)
class Limits:
    """What reading one upload may take."""

    seconds: int = 120
    """Processor time; twice as much by the clock."""
    mebibytes: int = 1536


RUN_LIMITS = Limits(seconds=600, mebibytes=6144)


class IntakeProcess:
    """One process that reads one upload; a context manager that leaves nothing running.

    Parameters
    ----------
    orders : mapping
        See `identify.workbench.intake`.
    limits : Limits
    """

    def __init__(self, orders: Mapping[str, Any], limits: Limits) -> None:
        self._orders = {**orders, "seconds": limits.seconds, "mebibytes": limits.mebibytes}
        self._limits = limits
        self._process: subprocess.Popen[bytes] | None = None
        self._is_late = False

    def __enter__(self) -> IntakeProcess:
        environment = {
            name: value
            for name, value in os.environ.items()
            if name in ("PATH", "HOME", "LANG", "LC_ALL", "TMPDIR", "XDG_CACHE_HOME", "PYTHONPATH", "VIRTUAL_ENV")
        }
        # One thread each: a pool of threads reserves address space that the limit counts.
        environment |= {"OMP_NUM_THREADS": "1", "OPENBLAS_NUM_THREADS": "1", "PYTHONIOENCODING": "utf-8"}
        environment["PYTHONPATH"] = os.pathsep.join(path for path in sys.path if path)
        self._errors: IO[bytes] = tempfile.TemporaryFile()
        self._process = subprocess.Popen(
            [sys.executable, "-m", "identify.workbench.intake"],
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            stderr=self._errors,
            env=environment,
            close_fds=True,
        )
        self._clock = threading.Timer(2.0 * self._limits.seconds, self._end_late)
        self._clock.daemon = True
        self._clock.start()
        assert self._process.stdin is not None
        try:
            self._process.stdin.write(json.dumps(self._orders).encode() + b"\n")
            self._process.stdin.close()
        except BrokenPipeError:
            pass  # it has ended already; reading its lines will say so
        return self

    def __exit__(self, *_: object) -> None:
        self._clock.cancel()
        self.end()
        assert self._process is not None and self._process.stdout is not None
        self._process.stdout.close()
        self._process.wait()
        self._errors.close()

    def end(self) -> None:
        """End the process now."""
        if self._process is not None and self._process.poll() is None:
            self._process.kill()

    def _end_late(self) -> None:
        self._is_late = True
        self.end()

    def lines(self) -> Iterator[dict[str, Any]]:
        """What the process says, up to its last line.

        Raises
        ------
        InputError
            If it ended before its last line: out of time or memory, or broken by the file.
        """
        assert self._process is not None and self._process.stdout is not None
        while True:
            text = self._process.stdout.readline(MAX_LINE_BYTES)
            if not text.endswith(b"\n"):
                break
            try:
                line = json.loads(text)
            except ValueError:
                break
            if not isinstance(line, dict):
                break
            if "end" in line:
                return
            yield line
        self.end()
        code = self._process.wait()
        raise InputError(
            "upload", where=str(self._orders["name"]), found=self._reason(code), expected="a file that can be read",
            hint="The file was not used. If it is what it should be, split it or use the command line.",
        )  # fmt: skip

    def _reason(self, code: int) -> str:
        if self._is_late:
            return f"no end after {2 * self._limits.seconds} s"
        if code in (-24, -9):  # SIGXCPU, and SIGKILL that follows it
            return f"more than {self._limits.seconds} s of work"
        self._errors.seek(0, os.SEEK_END)
        self._errors.seek(max(0, self._errors.tell() - 4000))
        last = self._errors.read().decode("utf-8", "replace").strip().splitlines()
        if last and "MemoryError" in last[-1]:
            return f"more than {self._limits.mebibytes} MiB of memory needed"
        return f"the reading process ended with code {code}" + (f" ({last[-1][:200]})" if last else "")
