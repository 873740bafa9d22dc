"""In which order, how sure, at what level, what next?"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Final, NamedTuple

import numpy as np

from identify.chem.constitution import is_only_isomer
from identify.evidence.facts import formula_facts
from identify.ranking.alternatives import (
    ELSEWHERE_NAMES,
    KINDS,
    MIXTURE,
    Chances,
    Groups,
    describe_query,
    group_isomers,
)
from identify.ranking.claim import make_claim
from identify.ranking.follow_up import propose_follow_up
from identify.ranking.model import RankingModel, default_model, explain_candidate
from identify.ranking.shortlist import Draft
from identify.records import (
    Candidate,
    Claim,
    EvidenceItem,
    Explanation,
    FloatArray,
    FollowUp,
    MolecularIonEstimate,
    Purity,
    Query,
    Terms,
)
from identify.settings import Settings

OTHER_ANSWERS: Final = ("other compounds listed", "isomers without an entry", "something else")
"""What a candidate stands against, in the explanation of its odds."""
N_REASONS: Final = 3
"""Reasons given for something else, beside the purity of the query."""


class Ranking(NamedTuple):
    """What ranking adds to a query."""

    candidates: tuple[Candidate, ...]
    in_library_probability: float
    claim: Claim
    follow_up: tuple[FollowUp, ...]


class Answers(NamedTuple):
    """Log-odds of all answers to a query, before they become probabilities.

    Attributes
    ----------
    listed : array of shape (n_candidates,)
        As steep as `RankingModel.steepness` says.
    unlisted : array of shape (n_groups,)
        Isomers without an entry; ``-inf`` where there can be none (CH2Cl2), and where the formula is not known.
    elsewhere : float
        Something else.
    groups : Groups
    """

    listed: FloatArray
    unlisted: FloatArray
    elsewhere: float
    groups: Groups


def list_answers(
    query: Query,
    drafts: Sequence[Draft],
    evidence: Sequence[Sequence[EvidenceItem]],
    log_odds: FloatArray,
    model: RankingModel,
    purity: Purity | None,
) -> Answers:
    """Log-odds of each listed compound, of unlisted isomers of each group, and of something else.

    Parameters
    ----------
    query : Query
    drafts : sequence of Draft
        At least one.
    evidence : sequence of sequences of EvidenceItem
        Of the drafts, in their order.
    log_odds : array of shape (n_drafts,)
        For each compound, before its rivals are looked at.
    model : RankingModel
    purity : Purity or None
        None where it was not looked at.

    Returns
    -------
    Answers
    """
    features = np.array([draft.features for draft in drafts])
    about = describe_query(query.spectrum, purity)
    groups = group_isomers([draft.entry for draft in drafts], features, log_odds, evidence, about)
    steepness = model.steepness["any"] + sum(
        model.steepness[kind] * float(is_kind) for kind, is_kind in zip(KINDS, groups.kinds, strict=True)
    )
    listed = steepness * log_odds
    unlisted = model.unlisted.value(groups.unlisted) + _log_sums(listed, groups)
    can_exist = np.array([bool(key) and not is_only_isomer(key) for key in groups.keys])
    unlisted = np.where(can_exist, unlisted, -np.inf)
    return Answers(listed, unlisted, float(model.elsewhere.value(groups.elsewhere)), groups)


def weigh_answers(answers: Answers, model: RankingModel) -> Chances:
    """Probabilities of each listed compound, of unlisted isomers, and of something else.

    Parameters
    ----------
    answers : Answers
    model : RankingModel

    Returns
    -------
    Chances
    """
    everything = np.concatenate([answers.listed, answers.unlisted, [answers.elsewhere]])
    chance = np.exp(model.sharpness * (everything - everything.max()))
    chance /= chance.sum()
    n = answers.listed.size
    return Chances(chance[:n], chance[n:-1], float(chance[-1]), answers.groups)


def explain_drafts(
    drafts: Sequence[Draft],
    evidence: Sequence[Sequence[EvidenceItem]],
    molecular_ion: MolecularIonEstimate,
    model: RankingModel,
) -> list[Explanation]:
    """What speaks for each draft before its rivals are looked at; its value is the log-odds.

    Parameters
    ----------
    drafts : sequence of Draft
    evidence : sequence of sequences of EvidenceItem
        As many as drafts.
    molecular_ion : MolecularIonEstimate
    model : RankingModel

    Returns
    -------
    list of Explanation
    """
    return [
        explain_candidate(model, draft.match, found, _nominal_mass(draft), molecular_ion)
        for draft, found in zip(drafts, evidence, strict=True)
    ]


def rank(
    query: Query,
    drafts: Sequence[Draft],
    evidence: Sequence[Sequence[EvidenceItem]],
    molecular_ion: MolecularIonEstimate,
    settings: Settings,
    model: RankingModel | None = None,
    *,
    purity: Purity | None = None,
) -> Ranking:
    """Candidates in their final order with probabilities, the claim and the next measurements.

    Parameters
    ----------
    query : Query
    drafts : sequence of Draft
        From `identify.ranking.shortlist.shortlist`.
    evidence : sequence of sequences of EvidenceItem
        Evidence of the drafts, in their order; a draft beyond its length has none.
    molecular_ion : MolecularIonEstimate
    settings : Settings
    model : RankingModel, optional
        The shipped one by default.
    purity : Purity, optional
        A query that is no single compound gets no claim on one; part of what something else is judged by.

    Returns
    -------
    Ranking
        As many candidates as drafts; probabilities are of the compound and add up to the probability that the compound is
        in the library. The explanation of a candidate adds up to the natural logarithm of its odds.
    """
    model = model or default_model()
    if not drafts:
        return Ranking((), 0.0, make_claim((), None, model, settings), ())
    items = [tuple(evidence[place]) if place < len(evidence) else () for place in range(len(drafts))]
    told = explain_drafts(drafts, items, molecular_ion, model)
    log_odds = np.array([explained.value for explained in told])
    order = np.argsort(-log_odds, kind="stable")
    drafts, items, told = [drafts[n] for n in order], [items[n] for n in order], [told[n] for n in order]
    chances = weigh_answers(list_answers(query, drafts, items, log_odds[order], model, purity), model)
    candidates = tuple(
        Candidate(
            rank=place + 1,
            entry=draft.entry,
            library=draft.library,
            aligned=draft.aligned,
            cosine=draft.cosine,
            reverse=draft.reverse,
            evidence=items[place],
            probability=float(chances.listed[place]),
            explanation=explained,
            n_entries=draft.n_entries,
        )
        for place, (draft, explained) in enumerate(zip(drafts, _explain_odds(told, chances, model), strict=True))
    )
    claim = make_claim(candidates, chances, model, settings, purity)
    follow_up = propose_follow_up(query, candidates, chances)
    return Ranking(candidates, float(chances.listed.sum()), claim, follow_up)


def _nominal_mass(draft: Draft) -> int | None:
    found = formula_facts(draft.entry.formula_as_measured)
    return found.nominal_mass if found else None


def _log_sums(log_odds: FloatArray, groups: Groups) -> FloatArray:
    """Logarithm of the summed odds of the members of each group."""
    top = float(log_odds.max())
    sums = np.bincount(groups.of_candidate, np.exp(log_odds - top), minlength=len(groups.keys))
    logs: FloatArray = np.log(np.maximum(sums, 1e-300)) + top
    return logs


def _explain_odds(told: Sequence[Explanation], chances: Chances, model: RankingModel) -> list[Explanation]:
    """Natural log of each candidate's odds against all other answers: what speaks for it, less what speaks for the rest.

    What speaks for the rest is divided among the other answers by their probabilities.
    """
    listed, unlisted = float(chances.listed.sum()), float(chances.unlisted.sum())
    chance = np.clip(chances.listed, 1e-12, 1 - 1e-12)
    odds = np.log(chance / (1.0 - chance))
    why = _say_elsewhere(chances.groups, model)
    explained = []
    for one, own, others in zip(told, odds.tolist(), np.maximum(listed - chance, 0.0).tolist(), strict=True):
        shares = (others, unlisted, chances.elsewhere)
        whole, rest = max(sum(shares), 1e-300), own - one.value
        details = (
            f"probability {others:.3g}",
            f"probability {unlisted:.3g}",
            f"probability {chances.elsewhere:.3g}; {why}",
        )
        parts = Terms(OTHER_ANSWERS, tuple(rest * share / whole for share in shares), details)
        against = Explanation("against all other answers", float(sum(parts.values)), parts=parts)
        explained.append(Explanation("log-odds", one.value + against.value, parts=(one, against)))
    return explained


def _say_elsewhere(groups: Groups, model: RankingModel) -> str:
    """What weighs most in the log-odds of something else, and what the purity of the query adds."""
    parts: dict[str, float] = {}
    for name, value in zip(ELSEWHERE_NAMES, model.elsewhere.parts(groups.elsewhere).tolist(), strict=True):
        subject = name.partition("; ")[0]
        parts[subject] = parts.get(subject, 0.0) + value
    mixture = sum(parts.pop(name) for name in MIXTURE)
    most = sorted(parts.items(), key=lambda part: -abs(part[1]))[:N_REASONS]
    said = ", ".join(f"{name} {value:+.2f}" for name, value in [("purity of the query", mixture), *most])
    return f"its log-odds {float(model.elsewhere.value(groups.elsewhere)):+.2f}, in it {said}"
