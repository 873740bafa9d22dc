"""Standards measured in this laboratory: proposed by one person, reviewed by another, then searchable at once.

::

    propose ──► proposed ──review──► own standard ──withdraw, supersede──► withdrawn
                              └────► refused
"""

from __future__ import annotations

import unicodedata
from dataclasses import asdict, dataclass, replace
from datetime import datetime
from pathlib import Path

from identify.errors import InputError, LibraryConflict, UsageError, quote
from identify.library.audit import EntryAudit, audit_entry
from identify.library.cache import load_index
from identify.library.conflicts import Conflict, find_conflicts
from identify.library.drafts import Policy, judge_record, tidy
from identify.library.events import Event, read_events
from identify.library.insertion import Insertion
from identify.library.intake import folder_of
from identify.library.rows import Draft
from identify.library.standing import get_entry, move_entries
from identify.library.store import Library
from identify.records import Entry, EntryStatus, Identity, Rejection, SpectrumRecord
from identify.settings import Weighting

ACCESSION = "OWN-{number:06d}"


@dataclass(frozen=True, slots=True)
class StandardDetails:
    """What is known of the material and the measurement, beside the spectrum; empty where not stated."""

    supplier: str = ""
    lot: str = ""
    purity: str = ""
    measured_on: str = ""
    """Date, ISO 8601."""
    analyst: str = ""
    method: str = ""
    note: str = ""


@dataclass(frozen=True, slots=True)
class ProposalReport:
    """A proposed standard, and what a reviewer should look at."""

    entry: Entry
    details: StandardDetails
    event: Event
    audit: EntryAudit
    conflicts: tuple[Conflict, ...]


@dataclass(frozen=True, slots=True)
class ReviewReport:
    """Outcome of a review."""

    entry: Entry
    """With its new standing."""
    event: Event


def propose_standard(
    library: Library,
    record: SpectrumRecord,
    *,
    identity: Identity,
    details: StandardDetails,
    derivative: str | None = None,
    who: str,
    when: datetime,
    reason: str = "",
    weighting: Weighting | None = None,
) -> ProposalReport:
    """Report on a standard that now waits for the review of a second person.

    Parameters
    ----------
    library : Library
        Open for writing.
    record : SpectrumRecord
        One spectrum, as read or as extracted from a run.
    identity : Identity
        What was measured; see `identify.library.identities.resolve_identity`.
    details : StandardDetails
    derivative : str, optional
        What was measured of it (`2 TMS`); the record's own by default.
    who : str
        Who proposes; cannot review it.
    when : datetime
    reason : str
    weighting : Weighting, optional
        For the comparison with other entries.

    Returns
    -------
    ProposalReport
        With the audit of the spectrum against its identity, and the entries that contradict it.

    Raises
    ------
    InputError
        If the spectrum cannot be an entry (not EI, not MS1, no usable peaks).
    UsageError
        If the date is none, or nobody is named.
    LibraryBusy, LibraryError
        If the library cannot be written.
    """
    _check_date(details.measured_on)
    stated = replace(
        record, identity=identity, derivative=record.derivative if derivative is None else derivative,
        title=identity.name, splash="",
    )  # fmt: skip
    draft = judge_record(stated, Policy(None, EntryStatus.PROPOSED))
    if isinstance(draft, Rejection):
        raise InputError(
            draft.reason, where=str(record.source), found=draft.found, expected=draft.expected, hint=draft.hint
        )
    documented = {name: tidy(text) for name, text in asdict(details).items() if text}
    with library.writing() as connection:
        insertion = Insertion(connection)
        (number,) = connection.execute("SELECT count(*) + 1 FROM event WHERE kind = 'proposed'").fetchone()
        entry_id = insertion.add(_named(draft, ACCESSION.format(number=number), record))
        event = insertion.finish(
            kind="proposed", who=who, when=when, reason=reason,
            content={"standard": documented, "concerns": [entry_id]},
        )  # fmt: skip
    (entry,) = library.get_entries([entry_id])
    index = load_index(library, weighting or Weighting())
    conflicts = find_conflicts(library, index, entry)
    return ProposalReport(entry, details, event, audit_entry(library, index, entry), conflicts)


def _check_date(text: str) -> None:
    if not text:
        return
    try:
        datetime.fromisoformat(text)
    except ValueError:
        raise UsageError("date of the measurement", found=quote(text), expected="a date like 2025-05-02") from None


def _named(draft: Draft, accession: str, record: SpectrumRecord) -> Draft:
    source = str(draft.columns["source"])
    source = source.removeprefix(folder_of(Path(record.source.path)))
    columns = {**draft.columns, "accession": accession, "source": source}
    return replace(draft, columns=columns)


def review_standard(
    library: Library, accession: str, *, accept: bool, who: str, when: datetime, reason: str
) -> ReviewReport:
    """Report on a proposed standard that was accepted or refused.

    Parameters
    ----------
    library : Library
        Open for writing.
    accession : str
        Of the proposed standard.
    accept : bool
    who : str
        Not the person who proposed it.
    when : datetime
    reason : str
        Required either way.

    Returns
    -------
    ReviewReport
        An accepted standard is found by the very next search.

    Raises
    ------
    LibraryConflict
        If it is not waiting for review, or the reviewer proposed it.
    UsageError
        Without a reason, or when nobody is named.
    LibraryBusy, LibraryError
        If there is no such entry, or the library cannot be written.
    """
    status = EntryStatus.OWN_STANDARD if accept else EntryStatus.REFUSED
    with library.writing() as connection:
        entry = get_entry(library, accession)
        if entry.status is not EntryStatus.PROPOSED:
            raise LibraryConflict(
                "review", where=f"{library.path}, {entry.accession}", found=f"standing '{entry.status}'",
                expected="a standard that waits for review",
            )  # fmt: skip
        (proposer,) = connection.execute(
            "SELECT who FROM event WHERE seq = (SELECT event_seq FROM entry WHERE id = ?)", (entry.id,)
        ).fetchone()
        if _same_person(proposer, who):
            raise LibraryConflict(
                "review", where=f"{library.path}, {entry.accession}", found=f"{quote(who)}, who proposed it",
                expected="a second person",
            )  # fmt: skip
        event = move_entries(
            connection, {entry.id: status}, kind="accepted" if accept else "refused", who=who, when=when, reason=reason
        )
    (entry,) = library.get_entries([entry.id])
    return ReviewReport(entry, event)


def _same_person(one: str, other: str) -> bool:
    first, second = ("".join(unicodedata.normalize("NFKC", name).casefold().split()) for name in (one, other))
    return first == second


def supersede_standard(
    library: Library, accession: str, by: str, *, who: str, when: datetime, reason: str
) -> ReviewReport:
    """Report on an entry that was withdrawn because a better standard of the same compound replaces it.

    Parameters
    ----------
    library : Library
        Open for writing.
    accession : str
        Of the entry to withdraw.
    by : str
        Accession of the accepted standard that replaces it.
    who, reason : str
    when : datetime

    Returns
    -------
    ReviewReport

    Raises
    ------
    LibraryConflict
        If the old one is not in use, the new one no accepted standard, or they are different compounds or derivatives.
    LibraryError, UsageError
        If one of them does not exist, or no reason is given.
    """
    with library.writing() as connection:
        old, new = get_entry(library, accession), get_entry(library, by)
        faults = (
            (old.id == new.id, "the same entry twice", "two entries"),
            (old.status not in _REPLACEABLE, f"standing '{old.status}' of {old.accession}", "an entry in use"),
            (new.status is not EntryStatus.OWN_STANDARD, f"standing '{new.status}' of {new.accession}", "own standard"),
            (
                (old.compound_id, old.measured_as) != (new.compound_id, new.measured_as),
                f"{old.identity.name} {old.measured_as} and {new.identity.name} {new.measured_as}", "one compound",
            ),
        )  # fmt: skip
        for is_wrong, found, expected in faults:
            if is_wrong:
                raise LibraryConflict("replacement", where=str(library.path), found=found, expected=expected)
        event = move_entries(
            connection, {old.id: EntryStatus.WITHDRAWN}, kind="superseded", who=who, when=when, reason=reason,
            content={"by": new.id, "concerns": [new.id]},
        )  # fmt: skip
    (old,) = library.get_entries([old.id])
    return ReviewReport(old, event)


_REPLACEABLE = frozenset(
    {EntryStatus.REFERENCE, EntryStatus.OWN_STANDARD, EntryStatus.DEMONSTRATION, EntryStatus.QUARANTINED}
)


def list_proposals(library: Library) -> list[Entry]:
    """Standards that wait for review, oldest first."""
    return library.get_entries(library.entry_ids({EntryStatus.PROPOSED}))


def read_standard_details(library: Library, accession: str) -> StandardDetails:
    """Material and measurement of a standard, as proposed; all empty for an entry that is none.

    Parameters
    ----------
    library : Library
    accession : str

    Returns
    -------
    StandardDetails

    Raises
    ------
    LibraryError
        If there is no such entry.
    """
    entry = get_entry(library, accession)
    with library.reading() as connection:
        (seq,) = connection.execute("SELECT event_seq FROM entry WHERE id = ?", (entry.id,)).fetchone()
        known: dict[str, str] = next(read_events(connection, seq, seq)).details.get("standard", {})
    return StandardDetails(**known)
