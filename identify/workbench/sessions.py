"""Who is at the browser: a one-time link for whoever started the program, names and passwords for everybody else.

Links and sessions live in memory only, as hashes: after a restart none of the old ones is worth anything.
"""

from __future__ import annotations

import hashlib
import secrets
import threading
import time
from collections.abc import Callable
from dataclasses import dataclass

IDLE_S = 12 * 3600.0
MAX_SESSIONS = 1000
MAX_FAILURES, PAUSE_S = 5, 60.0


@dataclass(frozen=True, slots=True)
class Person:
    """Whoever is signed in."""

    name: str
    role: str
    """`analyst` or `reviewer`; a reviewer may do what an analyst may."""

    def may(self, role: str) -> bool:
        """Whether the person's role covers another."""
        return self.role == "reviewer" or role == self.role


class Sessions:
    """Sessions of one run of the program.

    Parameters
    ----------
    clock : callable
        Seconds that never go back.
    """

    def __init__(self, clock: Callable[[], float] = time.monotonic) -> None:
        self._clock = clock
        self._lock = threading.Lock()
        self._links: dict[str, Person] = {}
        self._sessions: dict[str, tuple[Person, float]] = {}
        self._failures: dict[str, tuple[int, float]] = {}

    def new_link(self, person: Person) -> str:
        """Token that signs this person in, once."""
        token = secrets.token_urlsafe(32)
        with self._lock:
            self._links[_digest(token)] = person
        return token

    def use_link(self, token: str) -> str | None:
        """Session for a token that has not been used; None for any other."""
        with self._lock:
            person = self._links.pop(_digest(token), None)
        return self.start(person) if person else None

    def start(self, person: Person) -> str:
        """Session of a person whose identity has been checked."""
        session = secrets.token_urlsafe(32)
        with self._lock:
            while len(self._sessions) >= MAX_SESSIONS:
                del self._sessions[min(self._sessions, key=lambda key: self._sessions[key][1])]
            self._sessions[_digest(session)] = (person, self._clock())
        return session

    def find(self, session: str) -> Person | None:
        """The person of a session that has not been idle for too long."""
        key, now = _digest(session), self._clock()
        with self._lock:
            person, seen = self._sessions.get(key, (None, 0.0))
            if person is None or now - seen > IDLE_S:
                self._sessions.pop(key, None)
                return None
            self._sessions[key] = (person, now)
        return person

    def end(self, session: str) -> None:
        """Sign out."""
        with self._lock:
            self._sessions.pop(_digest(session), None)

    def is_paused(self, name: str) -> bool:
        """Whether a name has had so many wrong passwords that it must wait."""
        with self._lock:
            count, since = self._failures.get(name, (0, 0.0))
            return count >= MAX_FAILURES and self._clock() - since < PAUSE_S

    def note_sign_in(self, name: str, *, is_right: bool) -> None:
        """Count wrong passwords of a name; a right one forgets them."""
        with self._lock:
            count, since = self._failures.pop(name, (0, 0.0))
            if not is_right:
                fresh = 0 if self._clock() - since > PAUSE_S else count
                if len(self._failures) >= MAX_SESSIONS:
                    self._failures.clear()
                self._failures[name] = (fresh + 1, self._clock())


def _digest(secret: str) -> str:
    return hashlib.sha256(secret.encode("utf-8", "surrogatepass")).hexdigest()
