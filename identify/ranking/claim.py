"""What is the strongest statement these candidates support, at the user's threshold?"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Final

from identify.chem.isomers import count_isomers
from identify.chem.structures import compound_classes, has_diastereomers
from identify.errors import StructureError
from identify.ranking.alternatives import Chances
from identify.ranking.model import RankingModel
from identify.records import Candidate, Claim, ClaimLevel, Purity, Verdict
from identify.settings import Settings

PUBLISHED_LEVELS: Final = {
    ClaimLevel.CONFIRMED: ("1", "1"),
    ClaimLevel.SUPPORTED: ("2", "2a"),
    ClaimLevel.TENTATIVE: ("2", "3"),
    ClaimLevel.ISOMER_GROUP: ("2", "3"),
    ClaimLevel.CLASS: ("3", "3"),
    ClaimLevel.NO_CLAIM: ("4", "5"),
}
"""Levels of the Metabolomics Standards Initiative 2007 and of Schymanski et al. 2014 (definitions from memory, see methods.md
section 6). A supported claim without an agreeing retention index is level 3 of the second scheme: isomers stay open."""

INDEPENDENT: Final = frozenset(
    {
        "molecular ion",
        "isotope pattern",
        "halogens in fragments",
        "carbon count",
        "losses from M",
        "nitrogen rule and rings",
        "accurate mass",
        "retention index",
    }
)
"""Kinds of evidence that do not come from the match of the fragments. "Intensity explained", "ions above M", "ions missing in the
query" and "ions only in the query" look at the same fragments again and support nothing by themselves."""

MOST_ISOMERS: Final = 20
"""Isomers without an entry are counted up to this number."""
MOST_NAMED: Final = 10
NAMED_FROM: Final = 0.02
"""A member of the isomer group is named when it is at least this likely, relative to the best one."""
MOST_CLASSED: Final = 5
"""Candidates whose classes are looked at."""


def percent(probability: float) -> str:
    """A probability as whole percent, never 0 % or 100 %.

    Parameters
    ----------
    probability : float
        In [0, 1].

    Returns
    -------
    str

    Examples
    --------
    >>> percent(0.874), percent(0.9999), percent(0.0)
    ('87 %', '> 99 %', '< 1 %')
    """
    if probability > 0.99:
        return "> 99 %"
    return "< 1 %" if probability < 0.01 else f"{100.0 * probability:.0f} %"


def make_claim(
    candidates: Sequence[Candidate],
    chances: Chances | None,
    model: RankingModel,
    settings: Settings,
    purity: Purity | None = None,
) -> Claim:
    """Strongest claim whose probability passes `settings.claim_threshold`; never `confirmed`.

    Parameters
    ----------
    candidates : sequence of Candidate
        Best first.
    chances : Chances or None
        From `identify.ranking.rank.weigh_answers`; None when there is no candidate.
    model : RankingModel
    settings : Settings
    purity : Purity, optional
        Where several entries are needed to explain the query, nothing is claimed about a single compound.

    Returns
    -------
    Claim
        With the probabilities of all levels. A group is at least as probable as each of its members.
    """
    if not candidates or chances is None:
        text = "No claim: no entry of the library resembles this spectrum."
        return _claim(ClaimLevel.NO_CLAIM, text, 1.0, (), (0.0, 0.0, 0.0))
    best, limit = candidates[0], settings.claim_threshold
    name, formula = best.entry.identity.name, best.entry.formula_as_measured
    group_key = chances.groups.keys[chances.groups.of_candidate[0]]
    class_name, class_chance = _likeliest_class(candidates, chances, model, limit)
    levels = (best.probability, chances.of_group(0), class_chance)
    if purity is not None and purity.verdict is Verdict.CONFLICTS:
        return _hold_back(purity, levels)
    if levels[0] >= limit:
        return _claim_compound(best, levels)
    if levels[1] >= limit and group_key:
        return _claim_group(candidates, chances, formula or group_key, levels)
    if class_chance >= limit:
        text = f"A compound of the class {class_name} ({percent(class_chance)}); no single formula stands out."
        return _claim(ClaimLevel.CLASS, text, class_chance, (class_name,), levels)
    absent = 1.0 - float(chances.listed.sum())
    if absent > 0.5:
        text = f"Probably not in the library ({percent(absent)}); the nearest entry is {name} ({percent(levels[0])})."
    else:
        text = f"No claim: the best match, {name}, reaches {percent(levels[0])} only."
    return _claim(ClaimLevel.NO_CLAIM, text, absent, (), levels)


def _hold_back(purity: Purity, levels: tuple[float, float, float]) -> Claim:
    """No claim on a mixture: the probabilities of the levels suppose that the query is one compound."""
    number = {2: "two", 3: "three"}.get(len(purity.parts), "several")
    names = " and ".join(f"{part.name} ({percent(part.share)} of the signal)" for part in purity.parts)
    text = (
        f"No claim: {number} entries together explain {percent(purity.explained_share)} of this spectrum, far more than one "
        f"does, for instance {names}. All probabilities suppose a single compound; take a cleaner spectrum or search what "
        "is left over."
    )
    return _claim(ClaimLevel.NO_CLAIM, text, 1.0 - levels[0], tuple(part.name for part in purity.parts), levels)


def _claim_compound(best: Candidate, levels: tuple[float, float, float]) -> Claim:
    name, chance = best.entry.identity.name, percent(levels[0])
    meant = what_is_meant(best)
    spoken = [item for item in best.evidence if item.kind in INDEPENDENT]
    agree = [item.kind for item in spoken if item.verdict is Verdict.AGREES and item.log_odds > 0]
    conflict = [item.kind for item in best.evidence if item.verdict is Verdict.CONFLICTS]
    if agree and not conflict:
        text = f"{meant}: the library match agrees with {', '.join(agree)}, and nothing conflicts ({chance})."
        claim = _claim(ClaimLevel.SUPPORTED, text, levels[0], (name,), levels, indexed="retention index" in agree)
    else:
        why = f"in conflict: {', '.join(conflict)}" if conflict else "no independent evidence speaks for it"
        text = f"{meant}: the library match alone ({chance}); {why}."
        claim = _claim(ClaimLevel.TENTATIVE, text, levels[0], (name,), levels)
    return claim


def what_is_meant(candidate: Candidate) -> str:
    """The compound of a claim in words: its name, and that stereoisomers a column may part are not told from it.

    Parameters
    ----------
    candidate : Candidate

    Returns
    -------
    str
        The name alone where the entry has no structure.
    """
    name, smiles = candidate.entry.identity.name, candidate.entry.identity.smiles
    try:
        is_one_of_several = bool(smiles) and has_diastereomers(smiles)
    except StructureError:
        is_one_of_several = False
    return f"{name} or a stereoisomer of it" if is_one_of_several else name


def _claim_group(
    candidates: Sequence[Candidate], chances: Chances, formula: str, levels: tuple[float, float, float]
) -> Claim:
    own = chances.groups.of_candidate == chances.groups.of_candidate[0]
    members = [c for c, is_member in zip(candidates, own, strict=True) if is_member]
    named = [c for c in members if c.probability >= NAMED_FROM * members[0].probability][:MOST_NAMED]
    names = tuple(candidate.entry.identity.name for candidate in named)
    unlisted, more = _count_unlisted(members)
    text = f"One of the isomers of {formula} ({percent(levels[1])}): {'; '.join(names)}"
    if len(members) == 1 and unlisted == 0:
        text += ", the only one of its kind; isomers of another kind are not excluded"
    if unlisted:
        text += f"; or one of {more}{unlisted} without an entry here"
    return _claim(ClaimLevel.ISOMER_GROUP, f"{text}.", levels[1], names, levels, unlisted=unlisted)


def _count_unlisted(members: Sequence[Candidate]) -> tuple[int | None, str]:
    """Isomers of the best member's kind without an entry, and "at least " when there may be more; None when not assessed."""
    smiles = members[0].entry.identity.smiles
    if not smiles:
        return None, ""
    try:
        counted = count_isomers(smiles, MOST_ISOMERS)
    except StructureError:
        return None, ""
    unlisted = max(counted.count - len(members), 0)
    return unlisted, "" if counted.is_complete else "at least "


def _likeliest_class(
    candidates: Sequence[Candidate], chances: Chances, model: RankingModel, limit: float
) -> tuple[str, float]:
    """The most telling class of the best candidate that passes the limit, else its likeliest one, with its probability.

    Isomers without an entry count with the class as far as the listed members of their group do; of all other compounds
    the measured share `model.same_class` does.
    """
    classes = [_classes_of(candidate) for candidate in candidates[:MOST_CLASSED]]
    found: list[tuple[str, float]] = []
    for name in classes[0]:
        of_group: dict[int, float] = {}
        whole: dict[int, float] = {}
        for place, own in enumerate(classes):
            group, chance = int(chances.groups.of_candidate[place]), float(chances.listed[place])
            whole[group] = whole.get(group, 0.0) + chance
            of_group[group] = of_group.get(group, 0.0) + (chance if name in own else 0.0)
        value = sum(
            inside + float(chances.unlisted[group]) * inside / whole[group]
            for group, inside in of_group.items()
            if whole[group] > 0
        )
        found.append((name, min(1.0, value + model.same_class * chances.elsewhere)))
    passing = [pair for pair in found if pair[1] >= limit]
    if passing:
        return passing[0]
    return max(found, key=lambda pair: pair[1], default=("", 0.0))


def _classes_of(candidate: Candidate) -> tuple[str, ...]:
    smiles = candidate.entry.identity.smiles
    if not smiles:
        return ()
    try:
        return compound_classes(smiles)
    except StructureError:
        return ()


def _claim(
    level: ClaimLevel,
    statement: str,
    probability: float,
    members: tuple[str, ...],
    levels: tuple[float, float, float],
    *,
    unlisted: int | None = None,
    indexed: bool = False,
) -> Claim:
    msi, schymanski = PUBLISHED_LEVELS[level]
    if level is ClaimLevel.SUPPORTED and not indexed:
        schymanski = "3"
    return Claim(level, statement, probability, members, *levels, unlisted, msi, schymanski)
