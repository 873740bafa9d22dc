"""What is said about the query itself, in sentences for terminal and page: one compound or several, classes, analogues."""

from __future__ import annotations

from identify.records import Identification, Verdict
from identify.report.words import ions_text, probability_text, score_text, sentence, visible_text

MAX_LEFT_NAMED = 8
MAX_CLASSES = 5


def purity_sentences(found: Identification) -> tuple[str, ...]:
    """Whether the query is one compound, what is left over and which background was met.

    Parameters
    ----------
    found : Identification

    Returns
    -------
    tuple of str
        Empty where it was not assessed.
    """
    purity = found.purity
    if purity is None or purity.verdict is Verdict.NOT_ASSESSED:
        return ()
    said = [sentence(purity.reason)]
    if purity.residual is not None and purity.verdict is not Verdict.AGREES:
        left = zip(purity.residual.mz.tolist(), purity.residual.intensity.tolist(), strict=True)
        said.append(f"Left over, to be searched as a query of its own: m/z {ions_text(left, MAX_LEFT_NAMED)}.")
    if purity.background:
        said.append(f"Known background among what is left over: {', '.join(map(visible_text, purity.background))}.")
    return tuple(said)


def nature_sentences(found: Identification) -> tuple[str, ...]:
    """Classes and analogues of a query that has no name.

    Parameters
    ----------
    found : Identification

    Returns
    -------
    tuple of str
        One sentence for each.
    """
    said = []
    for item in found.classes[:MAX_CLASSES]:
        reasons = [f"neighbours {', '.join(map(visible_text, item.neighbours))}"] if item.neighbours else []
        reasons += [f"ions: {'; '.join(map(visible_text, item.ions))}"] if item.ions else []
        why = f": {'; '.join(reasons)}" if reasons else ""
        said.append(sentence(f"Class {visible_text(item.name)} ({probability_text(item.probability)}){why}"))
    for like in found.analogues:
        change = "of the same mass" if like.shift == 0 else f"{visible_text(like.text)} ({like.shift:+d} Da)"
        said.append(f"Like {visible_text(like.name)}, {change}; similarity after shifting {score_text(like.score)}.")
    return tuple(said)
