"""What is the strongest statement these candidates support, at the user's threshold?"""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

from identify.records import Candidate, Claim, ClaimLevel, Verdict
from identify.settings import Settings

if TYPE_CHECKING:
    from identify.ranking.rank import Chances

PUBLISHED_LEVELS = {
    ClaimLevel.CONFIRMED: ("1", "1"),
    ClaimLevel.SUPPORTED: ("2", "2a"),
    ClaimLevel.TENTATIVE: ("2", "3"),
    ClaimLevel.ISOMER_GROUP: ("2", "3"),
    ClaimLevel.CLASS: ("3", "3"),
    ClaimLevel.NO_CLAIM: ("4", "5"),
}
"""Levels of the Metabolomics Standards Initiative 2007 and of Schymanski et al. 2014 (methods.md section 6)."""


def make_claim(candidates: Sequence[Candidate], chances: Chances | None, settings: Settings) -> Claim:
    """Strongest claim whose probability passes `settings.claim_threshold`; never `confirmed`.

    Parameters
    ----------
    candidates : sequence of Candidate
        Best first.
    chances : Chances or None
        From `identify.ranking.rank.weigh_answers`; None when there is no candidate.
    settings : Settings

    Returns
    -------
    Claim
    """
    if not candidates or chances is None:
        return _claim(ClaimLevel.NO_CLAIM, "No claim: no entry of the library resembles this spectrum.", 0.0)
    best = candidates[0]
    formula = best.entry.formula_as_measured
    group = [c for c in candidates if c is best or (formula and c.entry.formula_as_measured == formula)]
    p_compound = best.probability
    p_group = chances.of_group(0)
    name, limit = best.entry.identity.name, settings.claim_threshold
    levels = (p_compound, p_group, p_group)
    verdicts = {item.verdict for item in best.evidence}
    if p_compound >= limit:
        supported = Verdict.AGREES in verdicts and Verdict.CONFLICTS not in verdicts
        level = ClaimLevel.SUPPORTED if supported else ClaimLevel.TENTATIVE
        basis = "library match and independent evidence" if supported else "library match alone"
        return _claim(level, f"{name} ({basis}; {p_compound:.0%}).", p_compound, (name,), levels)
    if p_group >= limit and formula:
        members = tuple(c.entry.identity.name for c in group)
        text = f"One of the isomers of {formula} that these data cannot tell apart ({p_group:.0%}); best match {name}."
        return _claim(ClaimLevel.ISOMER_GROUP, text, p_group, members, levels)
    text = f"No claim: the best match, {name}, reaches {p_compound:.0%}."
    return _claim(ClaimLevel.NO_CLAIM, text, 1.0 - float(chances.listed.sum()), (), levels)


def _claim(
    level: ClaimLevel,
    statement: str,
    probability: float,
    members: tuple[str, ...] = (),
    levels: tuple[float, float, float] = (0.0, 0.0, 0.0),
) -> Claim:
    msi, schymanski = PUBLISHED_LEVELS[level]
    return Claim(level, statement, probability, members, *levels, msi_2007=msi, schymanski_2014=schymanski)
