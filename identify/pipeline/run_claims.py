"""Claims as they change when a run is seen as a whole: raised, lowered, or of a class."""

from __future__ import annotations

from dataclasses import replace

from identify.chem.constitution import is_only_isomer
from identify.ranking.claim import PUBLISHED_LEVELS, percent, what_is_meant
from identify.records import Claim, ClaimLevel, Identification

COMPOUND_LEVELS = (ClaimLevel.SUPPORTED, ClaimLevel.TENTATIVE)


def claim_what_is_left(found: Identification, threshold: float) -> Identification:
    """The identification with the strongest claim that the probabilities of its claim allow: compound, isomer group, none.

    Parameters
    ----------
    found : Identification
        With at least one candidate, and no claim: what the run as a whole adds has changed its probabilities.
    threshold : float

    Returns
    -------
    Identification
    """
    best = found.candidates[0]
    if best.probability >= threshold:
        return claim_compound(found)
    if best.entry.formula_as_measured and found.claim.group_probability >= threshold:
        return claim_group(found)
    text = f"No claim: the best match, {best.entry.identity.name}, reaches {percent(best.probability)} only."
    claim = replace(found.claim, statement=text, probability=1.0 - found.in_library_probability, members=())
    return replace(found, claim=claim)


def claim_compound(found: Identification) -> Identification:
    """The identification with its best candidate as a tentative claim.

    Parameters
    ----------
    found : Identification
        With at least one candidate.

    Returns
    -------
    Identification
    """
    best = found.candidates[0]
    msi, schymanski = PUBLISHED_LEVELS[ClaimLevel.TENTATIVE]
    shown = percent(best.probability)
    claim = Claim(
        ClaimLevel.TENTATIVE, f"{what_is_meant(best)}: library match and the run as a whole ({shown}).", best.probability,
        (best.entry.identity.name,), best.probability, max(best.probability, found.claim.group_probability),
        max(best.probability, found.claim.class_probability), msi_2007=msi, schymanski_2014=schymanski,
    )  # fmt: skip
    return replace(found, claim=claim)


def claim_group(found: Identification) -> Identification:
    """The identification claimed as an isomer of its best candidate's formula; as the compound where the formula allows no other.

    Parameters
    ----------
    found : Identification
        With at least one candidate.

    Returns
    -------
    Identification
    """
    formula, claim = found.candidates[0].entry.formula_as_measured, found.claim
    if is_only_isomer(formula):
        return claim_compound(found)
    names = tuple(c.entry.identity.name for c in found.candidates if c.entry.formula_as_measured == formula)
    msi, schymanski = PUBLISHED_LEVELS[ClaimLevel.ISOMER_GROUP]
    text = f"One of the isomers of {formula} ({percent(claim.group_probability)}): {'; '.join(names)}."
    group = replace(
        claim, level=ClaimLevel.ISOMER_GROUP, statement=text, probability=claim.group_probability, members=names,
        msi_2007=msi, schymanski_2014=schymanski,
    )  # fmt: skip
    return replace(found, claim=group)


def claim_class(found: Identification, name: str, probability: float) -> Identification:
    """The identification with a claim at class level where it had none.

    Parameters
    ----------
    found : Identification
    name : str
        The class, as a noun phrase.
    probability : float
        In [0, 1].

    Returns
    -------
    Identification
    """
    msi, schymanski = PUBLISHED_LEVELS[ClaimLevel.CLASS]
    shown = percent(probability)
    claim = Claim(
        ClaimLevel.CLASS, f"{_capitalized(name)}, no single compound ({shown}).", probability, (name,),
        compound_probability=found.claim.compound_probability, group_probability=found.claim.group_probability,
        class_probability=probability, msi_2007=msi, schymanski_2014=schymanski,
    )  # fmt: skip
    return replace(found, claim=claim)


def lower_claim(found: Identification, reason: str, threshold: float) -> Identification:
    """The identification with its claim below the compound level, and a note that says why.

    Parameters
    ----------
    found : Identification
    reason : str
        A sentence.
    threshold : float
        Probability that the isomer group must reach to be claimed.

    Returns
    -------
    Identification
        Claims that are not at compound level only get the note.
    """
    notes = (*found.notes, reason)
    claim, best = found.claim, found.candidates[0] if found.candidates else None
    if claim.level not in COMPOUND_LEVELS or best is None:
        return replace(found, notes=notes)
    formula = best.entry.formula_as_measured
    group = [c for c in found.candidates if c is best or c.entry.formula_as_measured == formula]
    if formula and claim.group_probability >= threshold:
        level, probability = ClaimLevel.ISOMER_GROUP, claim.group_probability
        text = f"One of the isomers of {formula}; best match {best.entry.identity.name}, which the run as a whole does not allow."
    else:
        level, probability, group = ClaimLevel.NO_CLAIM, 1.0 - found.in_library_probability, []
        text = f"No claim: the best match, {best.entry.identity.name}, does not fit the run as a whole."
    msi, schymanski = PUBLISHED_LEVELS[level]
    lowered = replace(
        claim, level=level, statement=text, probability=probability, msi_2007=msi, schymanski_2014=schymanski,
        members=tuple(c.entry.identity.name for c in group),
    )  # fmt: skip
    return replace(found, claim=lowered, notes=notes)


def _capitalized(name: str) -> str:
    """A class as it begins a sentence; the prefix of "n-alkane" stays small."""
    prefix, hyphen, rest = name.partition("-") if name[1:2] == "-" else ("", "", name)
    return f"{prefix}{hyphen}{rest[:1].upper()}{rest[1:]}"
