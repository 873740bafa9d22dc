"""Who may sign in by name: kept in the case file with role and a slow hash of the password."""

from __future__ import annotations

import secrets
from functools import cache
from typing import TYPE_CHECKING

from identify.errors import UsageError, quote
from identify.workbench.case_file import CaseFile

if TYPE_CHECKING:
    from argon2 import PasswordHasher

ROLES = ("analyst", "reviewer")
"""An analyst reads, decides and proposes; a reviewer also reviews and withdraws standards."""
MIN_PASSWORD, MAX_PASSWORD = 10, 200


def list_people(case: CaseFile) -> list[tuple[str, str]]:
    """Name and role of everybody who may sign in."""
    with case.reading() as connection:
        return connection.execute("SELECT name, role FROM person ORDER BY name").fetchall()


def find_person(case: CaseFile, name: str) -> tuple[str, str] | None:
    """Role and password hash of a person."""
    with case.reading() as connection:
        row = connection.execute("SELECT role, password_hash FROM person WHERE name = ?", (name,)).fetchone()
    return None if row is None else (row[0], row[1])


def set_person(case: CaseFile, name: str, role: str, password: str, at: str) -> None:
    """Nothing comes out; afterwards the person may sign in with this role and password.

    Parameters
    ----------
    case : CaseFile
    name, role, password, at : str

    Raises
    ------
    UsageError
        For an unusable name, an unknown role, or a password that is too short or too long.
    """
    name = name.strip()
    if not (1 <= len(name) <= 80 and name.isprintable()):
        raise UsageError("name of a person", found=quote(name), expected="1 to 80 printable characters")
    if role not in ROLES:
        raise UsageError("role", found=quote(role), expected=" or ".join(ROLES))
    if not MIN_PASSWORD <= len(password) <= MAX_PASSWORD:
        raise UsageError(
            "password", found=f"{len(password)} characters", expected=f"{MIN_PASSWORD} to {MAX_PASSWORD} characters"
        )
    hashed = _hasher().hash(password)
    with case.writing() as connection:
        connection.execute(
            "INSERT INTO person (name, role, password_hash, added_at) VALUES (?, ?, ?, ?)"
            " ON CONFLICT (name) DO UPDATE SET role = excluded.role, password_hash = excluded.password_hash",
            (name, role, hashed, at),
        )


def check_password(case: CaseFile, name: str, password: str) -> str | None:
    """Role of the person when name and password belong together; takes as long when they do not.

    Parameters
    ----------
    case : CaseFile
    name, password : str

    Returns
    -------
    str or None
    """
    from argon2.exceptions import InvalidHashError, VerificationError

    found = find_person(case, name.strip())
    hasher = _hasher()
    try:
        hasher.verify(found[1] if found else _nobody(), password[:MAX_PASSWORD])
    except (VerificationError, InvalidHashError):
        return None
    return found[0] if found else None


@cache
def _hasher() -> PasswordHasher:
    from argon2 import PasswordHasher

    return PasswordHasher()


@cache
def _nobody() -> str:
    """Hash of no one's password, so that an unknown name costs as much time as a wrong password."""
    return _hasher().hash(secrets.token_hex(16))
