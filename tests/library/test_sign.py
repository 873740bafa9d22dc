"""A signed head, kept outside, proves a rewritten, shortened or exchanged history."""

from __future__ import annotations

import errno
import json
import os
import stat
from pathlib import Path

import pytest
from library_builders import WHEN, WHO, build_records, build_test_library, move

from identify.errors import LibraryConflict, UsageError
from identify.library.sign import check_head, create_signing_key, sign_head
from identify.library.store import open_library
from identify.records import EntryStatus

pytest.importorskip("cryptography", reason="the optional extra `sign` is not installed")


@pytest.fixture
def key(tmp_path: Path) -> Path:
    path = tmp_path / "key.pem"
    create_signing_key(path)
    return path


@pytest.fixture
def signed(library_path: Path, key: Path, tmp_path: Path) -> Path:
    path = tmp_path / "head.json"
    with open_library(library_path) as library:
        assert sign_head(library, key, path, who=WHO, when=WHEN).agrees
    return path


def test_a_key_that_does_not_fit_on_the_disk_leaves_no_half_file(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def refuse(_: int) -> None:
        raise OSError(errno.ENOSPC, "No space left on device")

    monkeypatch.setattr(os, "fsync", refuse)
    with pytest.raises(UsageError, match="No space left"):
        create_signing_key(tmp_path / "key.pem")
    assert list(tmp_path.iterdir()) == []


def test_the_key_is_readable_by_its_owner_only_and_never_overwritten(key: Path) -> None:
    assert stat.S_IMODE(key.stat().st_mode) == 0o600
    with pytest.raises(UsageError, match="already exists"):
        create_signing_key(key)


def test_a_grown_library_still_agrees(library_path: Path, signed: Path) -> None:
    move(library_path, 2, EntryStatus.WITHDRAWN)
    with open_library(library_path) as library:
        check = check_head(library, signed)
    assert (check.agrees, check.event, check.n_events_since, check.signed_by) == (True, 2, 1, WHO)
    assert check.reason == "event 2 is the one that was signed"


def test_another_or_rebuilt_or_shortened_library_does_not_agree(library_path: Path, key: Path, tmp_path: Path) -> None:
    short = library_path.read_bytes()
    move(library_path, 2, EntryStatus.WITHDRAWN)
    with open_library(library_path) as library:
        sign_head(library, key, tmp_path / "long.json", who=WHO, when=WHEN)
    library_path.write_bytes(short)
    with open_library(library_path) as library:
        check = check_head(library, tmp_path / "long.json")
    assert not check.agrees
    assert check.reason == "the library has only 2 events: it was set back or replaced"
    move(library_path, 3, EntryStatus.WITHDRAWN)
    with open_library(library_path) as library:
        check = check_head(library, tmp_path / "long.json")
    assert check.reason == "event 3 is not the one that was signed: the history was rewritten"
    other = tmp_path / "other.ionlib"
    build_test_library(other, build_records()[:1])
    with open_library(other) as library:
        check = check_head(library, tmp_path / "long.json")
    assert not check.agrees


def test_a_changed_statement_is_refused(library_path: Path, signed: Path) -> None:
    document = json.loads(signed.read_text())
    document["statement"]["signed_by"] = "Somebody Else"
    signed.write_text(json.dumps(document))
    with open_library(library_path) as library, pytest.raises(LibraryConflict, match="found one that does not fit"):
        check_head(library, signed)


def test_another_key_is_noticed_when_the_right_one_is_known(library_path: Path, signed: Path, tmp_path: Path) -> None:
    mine = json.loads(signed.read_text())["public_key"]
    other = create_signing_key(tmp_path / "other.pem")
    with open_library(library_path) as library:
        assert check_head(library, signed, public_key=mine).public_key == mine
        with pytest.raises(LibraryConflict, match="found another key"):
            check_head(library, signed, public_key=other)


def test_the_signature_is_plain_ed25519_over_the_documented_text(signed: Path) -> None:
    """Checked with the `cryptography` package alone, as an outsider would."""
    import base64

    from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PublicKey

    document = json.loads(signed.read_text())
    text = json.dumps(document["statement"], sort_keys=True, separators=(",", ":"), ensure_ascii=False)
    key = Ed25519PublicKey.from_public_bytes(base64.b64decode(document["public_key"]))
    key.verify(base64.b64decode(document["signature"]), text.encode())


def test_a_passphrase_protects_the_key(library_path: Path, tmp_path: Path) -> None:
    create_signing_key(tmp_path / "k.pem", passphrase="correct horse")
    with open_library(library_path) as library:
        for wrong in ("", "other"):
            with pytest.raises(UsageError, match="expected a private key in PEM form"):
                sign_head(library, tmp_path / "k.pem", tmp_path / "h.json", passphrase=wrong, who=WHO, when=WHEN)
        sign_head(library, tmp_path / "k.pem", tmp_path / "h.json", passphrase="correct horse", who=WHO, when=WHEN)


@pytest.mark.parametrize("text", ["", "{}", '{"statement": {"format": "x"}}', "[1]", '"x"'])
def test_what_is_no_statement_is_refused(library_path: Path, tmp_path: Path, text: str) -> None:
    (tmp_path / "h.json").write_text(text)
    with open_library(library_path) as library, pytest.raises(UsageError, match="signed head"):
        check_head(library, tmp_path / "h.json")
