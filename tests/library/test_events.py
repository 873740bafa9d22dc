"""A chain of events shows every change made behind its back."""

from __future__ import annotations

import hashlib
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
from library_builders import WHEN, WHO

from identify.errors import UsageError
from identify.library.connection import connect
from identify.library.events import GENESIS, append_event, canonical_json, event_hash, find_chain_fault
from identify.library.store import open_library


def test_the_hash_is_sha256_of_the_documented_text() -> None:
    text = '{"at":"t","content_hash":"c","kind":"k","previous_hash":"p","reason":"r","seq":1,"who":"w"}'
    assert event_hash(1, "t", "w", "k", "r", "c", "p") == hashlib.sha256(text.encode()).hexdigest()


def test_canonical_json_does_not_depend_on_order_and_refuses_nan() -> None:
    assert canonical_json({"a": 1, "b": [1.5, "ä"]}) == canonical_json({"b": [1.5, "ä"], "a": 1})
    with pytest.raises(ValueError, match="not JSON compliant"):
        canonical_json(float("nan"))


@pytest.fixture
def chain(library_path: Path):
    with open_library(library_path, writable=True) as library:
        for number in range(3):
            with library.writing() as raw:
                append_event(raw, kind="note", who=WHO, when=WHEN, reason=f"n{number}", content={"n": number})
        return library.events()


def test_an_intact_chain_starts_at_genesis_and_has_no_fault(chain) -> None:
    assert chain[0].previous_hash == GENESIS
    assert [event.seq for event in chain] == [1, 2, 3, 4, 5]
    assert find_chain_fault(iter(chain)) == ""


@pytest.mark.parametrize(
    ("change", "fault"),
    [
        ({"who": "Somebody Else"}, "event 3: its hash does not agree with its fields"),
        ({"at": "2020-01-01T00:00:00.000000Z"}, "event 3: its hash does not agree with its fields"),
        ({"reason": "other"}, "event 3: its hash does not agree with its fields"),
        ({"content": '{"n":9}'}, "event 3: its content does not agree with its content hash"),
        ({"previous_hash": "f" * 64}, "event 3: it does not continue event 2"),
        ({"who": b"Tester"}, "event 3: a field is no text"),
        ({"content": b"{}"}, "event 3: a field is no text"),
    ],
)
def test_a_changed_event_is_named(chain, change: dict[str, Any], fault: str) -> None:
    assert find_chain_fault(iter([*chain[:2], replace(chain[2], **change), *chain[3:]])) == fault


def test_a_removed_event_and_a_rewritten_one_are_named(chain) -> None:
    assert find_chain_fault(iter([*chain[:2], *chain[3:]])) == "event 3 is missing"
    old = chain[2]
    forged = replace(old, who="Forger")
    forged = replace(
        forged, hash=event_hash(3, old.at, "Forger", old.kind, old.reason, old.content_hash, old.previous_hash)
    )
    assert find_chain_fault(iter([*chain[:2], forged, *chain[3:]])) == "event 4: it does not continue event 3"


def test_an_event_outside_a_transaction_is_a_bug(library_path: Path) -> None:
    connection = connect(library_path, writable=True)
    with pytest.raises(RuntimeError, match="transaction"):
        append_event(connection, kind="x", who=WHO, when=WHEN, reason="", content={})
    connection.close()


def test_a_change_while_reading_is_a_bug_and_not_kept(library_path: Path) -> None:
    with open_library(library_path, writable=True) as library:
        before = library.fingerprint
        with pytest.raises(RuntimeError, match="only `writing` opens"), library.reading() as raw:
            append_event(raw, kind="x", who=WHO, when=WHEN, reason="", content={})
        assert library.fingerprint == before


@pytest.mark.parametrize("who", ["", "   ", "a\nb", "x" * 201])
def test_somebody_must_be_named(library_path: Path, who: str) -> None:
    with open_library(library_path, writable=True) as library, pytest.raises(UsageError), library.writing() as raw:
        append_event(raw, kind="x", who=who, when=WHEN, reason="", content={})
