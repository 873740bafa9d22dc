"""Spectra in, identifications out: the main path.

::

    open_libraries → read → per query: clean → search every index → fetch entries → shortlist (one draft per compound)
        → evidence, purity → rank (probability, claim, follow-up) → classes and analogues of the unnamed → Identification

This is the main path of the program. `identify.pipeline.files` puts files before it and a `Report` behind it,
`identify.pipeline.batch` runs it on all cores, `identify.pipeline.runs` adds the way from a run to queries.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Sequence
from contextlib import ExitStack, contextmanager
from dataclasses import dataclass, replace
from functools import lru_cache
from pathlib import Path

from identify.errors import SpectrumError, UsageError, quote
from identify.evidence.facts import build_query_facts
from identify.evidence.gather import gather_evidence
from identify.evidence.molecular_ion import estimate_molecular_ion
from identify.index import SearchIndex, search_index
from identify.index.union import merge_hits
from identify.library.cache import load_index
from identify.library.calibration import read_calibration
from identify.library.store import Library, open_library
from identify.pipeline.query_nature import describe_unnamed, judge_parts
from identify.ranking.calibration import SHIPPED, Shift, shift_model
from identify.ranking.grouping import Match
from identify.ranking.model import RankingModel, default_model
from identify.ranking.rank import rank
from identify.ranking.shortlist import shortlist
from identify.records import (
    Candidate,
    CleanSpectrum,
    Entry,
    EntryStatus,
    Hit,
    Identification,
    LibraryState,
    Query,
    Rejection,
    SpectrumRecord,
)
from identify.settings import Settings
from identify.similarity.pair import score_pair
from identify.spectra.cleaning import clean_spectrum

DEPTH_OF_RESIDUAL = 20
"""Hits by each score wanted for what the best entry leaves over: enough for the few compounds that are tried as further parts."""
Progress = Callable[[int, str], None]
"""Called with the number of queries done and the name of the one in hand."""


@dataclass(frozen=True, slots=True)
class SearchableLibrary:
    """A library open for reading, its index, and its state when it was opened."""

    library: Library
    index: SearchIndex
    state: LibraryState
    shift: Shift = SHIPPED
    """Calibration of the probabilities that the library carries."""
    is_busy: bool = False
    """Whether so many queries are to come that loading the machine code of the search (0.5 s) pays."""


@contextmanager
def open_libraries(
    paths: Sequence[Path], settings: Settings, as_of: Sequence[int | str] = ()
) -> Iterator[tuple[SearchableLibrary, ...]]:
    """Libraries with their search indexes, closed on leaving the block.

    Parameters
    ----------
    paths : sequence of Path
        At least one library file.
    settings : Settings
        The weighting decides which index is loaded.
    as_of : sequence of int or str
        For each library the event (number, or first digits of its hash) after which it is seen; empty for the present.

    Yields
    ------
    tuple of SearchableLibrary

    Raises
    ------
    UsageError
        Without any path, with the same library twice, or with another number of events than libraries.
    LibraryError
        If one of them cannot be opened.
    """
    if not paths:
        raise UsageError("--library", found="none", expected="at least one library file")
    if len({path.resolve() for path in paths}) < len(paths):
        raise UsageError("--library", found="the same library twice", expected="each library once")
    if as_of and len(as_of) != len(paths):
        found = f"{len(as_of)} events for {len(paths)} libraries"
        raise UsageError("--as-of", found=found, expected="one event for each library, in their order")
    events: Sequence[int | str | None] = as_of or [None] * len(paths)
    with ExitStack() as stack:
        opened = []
        for path, event in zip(paths, events, strict=True):
            library = stack.enter_context(open_library(path, as_of=event))
            opened.append(_make_searchable(library, settings))
        yield tuple(opened)


def _make_searchable(library: Library, settings: Settings) -> SearchableLibrary:
    calibration = read_calibration(library) if settings.use_calibration else None
    state = library.state()
    index = load_index(library, settings.weighting)
    if calibration is None:
        return SearchableLibrary(library, index, state)
    return SearchableLibrary(library, index, replace(state, calibration=calibration.described), calibration.shift)


def choose_model(libraries: Sequence[SearchableLibrary]) -> RankingModel:
    """The shipped ranking model, calibrated as the libraries say if all say the same.

    Parameters
    ----------
    libraries : sequence of SearchableLibrary

    Returns
    -------
    RankingModel
    """
    shifts = {item.shift for item in libraries}
    return _calibrated(shifts.pop()) if len(shifts) == 1 else default_model()


@lru_cache(maxsize=64)
def _calibrated(shift: Shift) -> RankingModel:
    return shift_model(default_model(), shift)


def identify_query(query: Query, libraries: Sequence[SearchableLibrary], settings: Settings) -> Identification:
    """Everything the libraries and the query's own evidence say about one cleaned query.

    Parameters
    ----------
    query : Query
    libraries : sequence of SearchableLibrary
    settings : Settings

    Returns
    -------
    Identification
        At most `settings.top` candidates, best first; none when no entry shares a peak.
    """
    matches = _find_matches(query.spectrum, libraries, settings)
    model = choose_model(libraries)
    drafts = shortlist(query.spectrum, matches, settings, model)
    molecular_ion = estimate_molecular_ion(query.spectrum, [(draft.entry, draft.cosine) for draft in drafts])
    facts = build_query_facts(query)
    evidence = [gather_evidence(query, draft.entry, draft.aligned, settings, facts) for draft in drafts]
    few = replace(settings, search_depth=min(settings.search_depth, DEPTH_OF_RESIDUAL))
    purity = judge_parts(query.spectrum, drafts, matches, lambda left: _find_matches(left, libraries, few))
    ranking = rank(query, drafts, evidence, molecular_ion, settings, model, purity=purity)
    classes, analogues = describe_unnamed(query, facts, ranking.claim, purity, molecular_ion, matches)
    return Identification(
        query=query,
        molecular_ion=molecular_ion,
        in_library_probability=ranking.in_library_probability,
        claim=ranking.claim,
        candidates=tuple(_score_accurately(query, c, settings) for c in ranking.candidates[: settings.top]),
        follow_up=ranking.follow_up,
        purity=purity,
        classes=classes,
        analogues=analogues,
        notes=_note_ionization(query),
    )


def _note_ionization(query: Query) -> tuple[str, ...]:
    """A warning where the record itself says that its spectrum is of another kind; what says nothing is taken for EI."""
    told = query.record.acquisition.ionization
    if told in ("", "EI"):
        return ()
    return (
        f"The record states the ionization {quote(told)}: scores and probabilities hold for electron ionization only.",
    )


def _score_accurately(query: Query, candidate: Candidate, settings: Settings) -> Candidate:
    """The candidate with scores on accurate m/z where both spectra carry it, and a note where only one does."""
    entry = candidate.entry.spectrum
    if query.spectrum.accurate is None and entry.accurate is None:
        return candidate
    pair = score_pair(query.spectrum, entry, settings)
    if not pair.is_accurate:
        return replace(candidate, notes=(*candidate.notes, pair.note))
    note = (
        f"Scores on accurate m/z ({settings.tolerance_ppm:g} ppm or {settings.tolerance_da:g} Da); "
        f"at nominal m/z cosine {candidate.cosine:.3f}, reverse {candidate.reverse:.3f}."
    )
    return replace(candidate, cosine=pair.cosine, reverse=pair.reverse, notes=(*candidate.notes, note))


def _find_matches(spectrum: CleanSpectrum, libraries: Sequence[SearchableLibrary], settings: Settings) -> list[Match]:
    """The best hits over all libraries with their entries; of equal ones own standards first, if the settings say so."""
    found: list[Sequence[Hit]] = []
    entries: list[dict[int, Entry]] = []
    for searchable in libraries:
        hits = search_index(searchable.index, spectrum, settings.search_depth, many=searchable.is_busy)
        found.append(hits)
        entries.append({entry.id: entry for entry in searchable.library.get_entries([hit.entry_id for hit in hits])})
    own = [[key for key, entry in held.items() if entry.status is EntryStatus.OWN_STANDARD] for held in entries]
    merged = merge_hits(found, settings.search_depth, own, prefer_own=settings.prefer_own_standards)
    return [
        Match(item.hit, entries[item.library][item.hit.entry_id], libraries[item.library].state.path) for item in merged
    ]


def make_query(record: SpectrumRecord, number: int, settings: Settings) -> Query:
    """Query number `number`, cleaned.

    Parameters
    ----------
    record : SpectrumRecord
    number : int
        Running number from 1; becomes the id ``q<number>``.
    settings : Settings

    Returns
    -------
    Query

    Raises
    ------
    SpectrumError
        If no usable peak is left, or the data are not a centroided peak list.
    """
    return Query(f"q{number}", record, clean_spectrum(record, settings.cleaning))


def identify_records(
    records: Iterable[SpectrumRecord],
    libraries: Sequence[SearchableLibrary],
    settings: Settings,
    rejected: list[Rejection],
    progress: Progress | None = None,
    *,
    first: int = 1,
) -> Iterator[Identification]:
    """Identifications one by one; a spectrum that cannot be used is added to `rejected` and the rest goes on.

    Parameters
    ----------
    records : iterable of SpectrumRecord
    libraries : sequence of SearchableLibrary
    settings : Settings
    rejected : list of Rejection
        Grows by what is left out.
    progress : callable, optional
    first : int
        Number of the first query.

    Yields
    ------
    Identification
    """
    for number, record in enumerate(records, start=first):
        if progress:
            progress(number - first, record.title or record.identity.name)
        try:
            query = make_query(record, number, settings)
        except SpectrumError as error:
            rejected.append(_rejection(error, record))
            continue
        yield identify_query(query, libraries, settings)


def _rejection(error: SpectrumError, record: SpectrumRecord) -> Rejection:
    source = record.source
    return Rejection(source.path, source.line, "unusable spectrum", error.found, error.expected, error.hint)
