"""A signed statement of the chain's head: an outside copy proves later which state the library was in.

Signature: Ed25519 (RFC 8032) with the user's own key, through the `cryptography` package (optional extra `sign`). The
statement is a small JSON file; what is signed is the canonical JSON of its `statement` part.
"""

from __future__ import annotations

import base64
import json
from dataclasses import dataclass
from datetime import datetime
from pathlib import Path
from typing import TYPE_CHECKING, Any

from identify.errors import LibraryConflict, UsageError
from identify.library.events import canonical_json, format_time
from identify.library.new_file import write_new_file
from identify.library.store import Library

if TYPE_CHECKING:
    from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey

FORMAT = "ionwitness.head/1"
_MAX_BYTES = 64 * 1024


@dataclass(frozen=True, slots=True)
class HeadCheck:
    """What a signed statement says about a library, and whether the library still agrees."""

    agrees: bool
    reason: str
    signed_at: str
    signed_by: str
    event: int
    fingerprint: str
    public_key: str
    """Base64 of the raw public key; compare it with the one you know."""
    n_events_since: int


def create_signing_key(path: Path | str, *, passphrase: str = "") -> str:
    """Public key (base64) of a new key pair; the private key is written to `path` as PEM, readable by its owner only.

    Parameters
    ----------
    path : Path or str
        New file.
    passphrase : str
        Encrypts the file when given.

    Returns
    -------
    str

    Raises
    ------
    UsageError
        If the file exists or cannot be written, or the package `cryptography` is missing.
    """
    _require_cryptography()
    from cryptography.hazmat.primitives import serialization
    from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey

    key = Ed25519PrivateKey.generate()
    encryption: serialization.KeySerializationEncryption = serialization.NoEncryption()
    if passphrase:
        encryption = serialization.BestAvailableEncryption(passphrase.encode())
    pem = key.private_bytes(serialization.Encoding.PEM, serialization.PrivateFormat.PKCS8, encryption)
    write_new_file(Path(path), pem, mode=0o600)
    return _public_text(key)


def _public_text(key: Ed25519PrivateKey) -> str:
    return base64.b64encode(key.public_key().public_bytes_raw()).decode()


def _require_cryptography() -> None:
    try:
        import cryptography  # noqa: F401
    except ImportError:
        raise UsageError(
            "signing", found="no package cryptography", expected="the extra `sign`",
            hint="Install ionwitness with it: ionwitness[sign].",
        ) from None  # fmt: skip


def sign_head(
    library: Library, key_file: Path | str, target: Path | str, *, passphrase: str = "", who: str, when: datetime
) -> HeadCheck:
    """Check of the signed statement of a library's present head that was written to `target`.

    Parameters
    ----------
    library : Library
    key_file : Path or str
        Private Ed25519 key in PEM form.
    target : Path or str
        New file.
    passphrase : str
    who : str
    when : datetime

    Returns
    -------
    HeadCheck

    Raises
    ------
    UsageError
        If the key cannot be read, the target exists, or the package `cryptography` is missing.
    """
    key = _read_key(Path(key_file), passphrase)
    events = library.events()
    statement = {
        "format": FORMAT,
        "library": events[0].hash,
        "event": events[-1].seq,
        "fingerprint": events[-1].hash,
        "signed_at": format_time(when),
        "signed_by": who,
    }
    signature = key.sign(canonical_json(statement).encode())
    document = {
        "statement": statement,
        "public_key": _public_text(key),
        "signature": base64.b64encode(signature).decode(),
    }
    write_new_file(Path(target), (json.dumps(document, indent=2, ensure_ascii=False) + "\n").encode())
    return check_head(library, target)


def _read_key(path: Path, passphrase: str) -> Ed25519PrivateKey:
    _require_cryptography()
    from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey
    from cryptography.hazmat.primitives.serialization import load_pem_private_key

    try:
        with path.open("rb") as stream:
            key = load_pem_private_key(stream.read(_MAX_BYTES), passphrase.encode() or None)
    except (OSError, ValueError, TypeError) as error:
        raise UsageError(
            "signing key", where=str(path), found=str(error), expected="a private key in PEM form"
        ) from None
    if not isinstance(key, Ed25519PrivateKey):
        raise UsageError("signing key", where=str(path), found="another kind of key", expected="an Ed25519 key")
    return key


def check_head(library: Library, signed: Path | str, *, public_key: str = "") -> HeadCheck:
    """Whether a library still contains the state that a signed statement vouches for.

    Parameters
    ----------
    library : Library
    signed : Path or str
        File written by `sign_head`.
    public_key : str
        Base64 of the key that must have signed; any key when empty (then compare `HeadCheck.public_key` yourself).

    Returns
    -------
    HeadCheck
        `agrees` is True when the signature is right and the library's event of that number has the signed hash. It says
        nothing about whether the library's content agrees with its hashes: verify the library too.

    Raises
    ------
    UsageError
        If the file is no signed statement, or the package `cryptography` is missing.
    LibraryConflict
        If the signature is wrong, or made by another key.
    """
    _require_cryptography()
    from cryptography.exceptions import InvalidSignature
    from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PublicKey

    path = Path(signed)
    statement, key, signature = _read_statement(path)
    if public_key and base64.b64encode(key).decode() != public_key.strip():
        raise LibraryConflict("signature", where=str(path), found="another key", expected=public_key.strip())
    try:
        Ed25519PublicKey.from_public_bytes(key).verify(signature, canonical_json(statement).encode())
    except (InvalidSignature, ValueError):
        raise LibraryConflict(
            "signature", where=str(path), found="one that does not fit", expected="an unchanged statement"
        ) from None
    return _compare(library, statement, base64.b64encode(key).decode())


def _read_statement(path: Path) -> tuple[dict[str, Any], bytes, bytes]:
    try:
        with path.open("rb") as stream:
            document = json.loads(stream.read(_MAX_BYTES))
        statement = document["statement"]
        key = base64.b64decode(document["public_key"], validate=True)
        signature = base64.b64decode(document["signature"], validate=True)
        if statement["format"] != FORMAT or type(statement["event"]) is not int:
            raise ValueError(f"format {statement['format']}")
        return statement, key, signature
    except (OSError, ValueError, KeyError, TypeError, RecursionError) as error:
        raise UsageError("signed head", where=str(path), found=str(error), expected=f"a file of {FORMAT}") from None


def _compare(library: Library, statement: dict[str, Any], public_key: str) -> HeadCheck:
    events = library.events()
    number, fingerprint = statement["event"], str(statement["fingerprint"])
    if events[0].hash != statement["library"]:
        agrees, reason = False, "this is another library"
    elif number > len(events):
        agrees, reason = False, f"the library has only {len(events)} events: it was set back or replaced"
    elif number < 1 or events[number - 1].hash != fingerprint:
        agrees, reason = False, f"event {number} is not the one that was signed: the history was rewritten"
    else:
        agrees, reason = True, f"event {number} is the one that was signed"
    since = max(len(events) - number, 0)
    return HeadCheck(
        agrees, reason, str(statement["signed_at"]), str(statement["signed_by"]), number, fingerprint, public_key, since
    )
