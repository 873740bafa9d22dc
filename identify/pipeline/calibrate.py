"""Do the probabilities fit this library? Its own replicates, played as unknowns, say so."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from datetime import datetime
from pathlib import Path
from typing import Final

import numpy as np

from identify.errors import UsageError
from identify.evidence.facts import build_query_facts
from identify.evidence.gather import gather_evidence
from identify.evidence.molecular_ion import estimate_molecular_ion
from identify.index import search_index
from identify.library.cache import load_index
from identify.library.calibration import store_calibration
from identify.library.events import Event
from identify.library.store import open_library
from identify.pipeline.query_nature import judge_parts
from identify.pipeline.search import Progress, SearchableLibrary
from identify.ranking.calibration import N_PARTS, SHIPPED, CalibrationResult, Played, fit_shift
from identify.ranking.grouping import Match, compound_key, isomer_key
from identify.ranking.model import default_model
from identify.ranking.rank import Answers, explain_drafts, list_answers
from identify.ranking.shortlist import shortlist
from identify.records import Entry, Query, Source, SpectrumRecord
from identify.settings import Settings

ABSENT_SHARE: Final = 0.375
"""Share of unknowns whose compound is not in the library, unless the user says otherwise: that of the shipped calibration."""
MOST_COMPOUNDS: Final = 400
SEED: Final = 20250501
USUAL_ENERGIES_EV: Final = (60.0, 80.0)


@dataclass(frozen=True, slots=True)
class LibraryCalibration:
    """Outcome of `calibrate_library`: what was found, and the event that stored it (None when nothing was stored)."""

    result: CalibrationResult
    event: Event | None


def calibrate_library(
    path: Path,
    settings: Settings,
    *,
    who: str,
    when: datetime,
    reason: str,
    absent_share: float = ABSENT_SHARE,
    is_trial: bool = False,
    progress: Progress | None = None,
) -> LibraryCalibration:
    """The calibration of the probabilities that fits the library's own replicates, stored in it as an event.

    Parameters
    ----------
    path : Path
    settings : Settings
    who, reason : str
    when : datetime
    absent_share : float
        Share of this laboratory's unknowns whose compound is not in the library, in (0, 1).
    is_trial : bool
        Only say what would be stored.
    progress : callable, optional

    Returns
    -------
    LibraryCalibration
        Without an event when the shipped calibration stays.

    Raises
    ------
    LibraryError
        If the library cannot be read or written.
    UsageError
        For a share out of range.

    Notes
    -----
    One replicate of each compound (at most `MOST_COMPOUNDS` compounds, chosen by a fixed seed) is played against the library
    without itself, and once more without its whole compound: 0.1 s per compound.
    """
    if not 0.0 < absent_share < 1.0:
        raise UsageError("share of absent compounds", found=str(absent_share), expected="a number between 0 and 1")
    with open_library(path, writable=not is_trial) as library:
        searchable = SearchableLibrary(library, load_index(library, settings.weighting), library.state())
        chosen = choose_replicates(list(library.iter_entries()))
        played = list(_play_all(chosen, searchable, settings, absent_share, progress))
        result = fit_shift(played, len(chosen))
        event = None
        if result.is_refitted and not is_trial:
            event = store_calibration(library, result, who=who, when=when, reason=reason)
    return LibraryCalibration(result, event)


def reset_calibration(path: Path, *, who: str, when: datetime, reason: str) -> Event:
    """Event with which a library goes back to the shipped calibration.

    Parameters
    ----------
    path : Path
    who, reason : str
    when : datetime

    Returns
    -------
    Event

    Raises
    ------
    LibraryError
        If the library cannot be written.
    """
    result = CalibrationResult(SHIPPED, False, 0, 0.0, 0.0, "back to the shipped calibration")
    with open_library(path, writable=True) as library:
        return store_calibration(library, result, who=who, when=when, reason=reason)


def choose_replicates(entries: Sequence[Entry]) -> list[Entry]:
    """One entry of each compound that has another one measured in the same form, in a fixed random order.

    Parameters
    ----------
    entries : sequence of Entry

    Returns
    -------
    list of Entry
        At most `MOST_COMPOUNDS`; 60–80 eV or unstated, not isotope-labelled.
    """
    groups: dict[tuple[str, str], list[Entry]] = defaultdict(list)
    for entry in entries:
        energy = entry.acquisition.energy_ev
        usual = energy is None or USUAL_ENERGIES_EV[0] <= energy <= USUAL_ENERGIES_EV[1]
        if usual and not entry.is_labelled and len(entry.spectrum.nominal):
            groups[compound_key(entry), entry.measured_as].append(entry)
    rng = np.random.default_rng(SEED)
    chosen: dict[str, Entry] = {}
    for (key, _), members in sorted(groups.items()):
        if len(members) > 1:
            chosen.setdefault(key, members[int(rng.integers(len(members)))])
    picked = list(chosen.values())
    return [picked[place] for place in rng.permutation(len(picked))[:MOST_COMPOUNDS]]


def _play_all(
    chosen: Sequence[Entry], searchable: SearchableLibrary, settings: Settings, absent_share: float,
    progress: Progress | None,
) -> Iterator[Played]:  # fmt: skip
    for number, entry in enumerate(chosen):
        if progress:
            progress(number, entry.identity.name)
        hits = search_index(searchable.index, entry.spectrum, settings.search_depth)
        held = {one.id: one for one in searchable.library.get_entries([hit.entry_id for hit in hits])}
        matches = [Match(hit, held[hit.entry_id]) for hit in hits if hit.entry_id != entry.id]
        without = [match for match in matches if compound_key(match.entry) != compound_key(entry)]
        for kept, weight in ((matches, 1.0 - absent_share), (without, absent_share)):
            if kept:
                yield play(entry, kept, settings, weight=weight, part=number % N_PARTS)


def play(entry: Entry, matches: Sequence[Match], settings: Settings, *, weight: float, part: int) -> Played:
    """One entry played as an unknown against these matches.

    Parameters
    ----------
    entry : Entry
    matches : sequence of Match
        At least one; not the entry itself.
    settings : Settings
    weight : float
    part : int

    Returns
    -------
    Played
    """
    model = default_model()
    record = SpectrumRecord(
        Source("replicate"), entry.spectrum.nominal.mz, entry.spectrum.nominal.intensity,
        acquisition=entry.acquisition, retention=entry.retention,
    )  # fmt: skip
    query = Query("replicate", record, entry.spectrum)
    drafts = shortlist(query.spectrum, matches, settings, model)
    ion = estimate_molecular_ion(query.spectrum, [(draft.entry, draft.cosine) for draft in drafts])
    facts = build_query_facts(query)
    evidence = [gather_evidence(query, draft.entry, draft.aligned, settings, facts) for draft in drafts]
    told = explain_drafts(drafts, evidence, ion, model)
    order = sorted(range(len(drafts)), key=lambda place: -told[place].value)
    # A replicate is one compound: what its best entry leaves over is not searched for a second one.
    purity = judge_parts(query.spectrum, drafts, matches, lambda left: ())
    answers = list_answers(
        query, [drafts[place] for place in order], [evidence[place] for place in order],
        np.array([told[place].value for place in order]), model, purity,
    )  # fmt: skip
    right, group = _right_answer(entry, [drafts[place].entry for place in order], answers)
    return Played(answers.listed, answers.unlisted, answers.elsewhere, right, group, weight, part)


def _right_answer(truth: Entry, listed: Sequence[Entry], answers: Answers) -> tuple[int | None, int | None]:
    """Place of the right candidate, else of the group of its isomers, else neither."""
    keys = [compound_key(entry) for entry in listed]
    if compound_key(truth) in keys:
        return keys.index(compound_key(truth)), None
    groups = answers.groups.keys
    own = isomer_key(truth)
    return None, groups.index(own) if own and own in groups else None
