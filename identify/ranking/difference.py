"""What speaks for one candidate less what speaks for another, part by part?"""

from __future__ import annotations

from identify.records import Explanation


def compare_explanations(first: Explanation, other: Explanation) -> Explanation:
    """The tree of `other` less that of `first`: how much less each part is worth.

    Parameters
    ----------
    first, other : Explanation
        What speaks for each of two candidates of one query, before their rivals are looked at (the first part of
        `Candidate.explanation`).

    Returns
    -------
    Explanation
        Its value is the natural logarithm of the quotient of their odds: below 0 where `other` is less likely. Parts are matched
        by their labels; one that only one of them has counts as 0 for the other.

    Examples
    --------
    >>> first = Explanation("sum", 3.0, parts=(Explanation("a", 2.0), Explanation("b", 1.0)))
    >>> other = Explanation("sum", 0.5, parts=(Explanation("a", 0.5),))
    >>> [(part.label, part.value) for part in compare_explanations(first, other).parts]
    [('a', -1.5), ('b', -1.0)]
    """
    return _difference(first, other)


def _difference(first: Explanation | None, other: Explanation | None) -> Explanation:
    mine = {part.label: part for part in first.parts} if first is not None else {}
    theirs = {part.label: part for part in other.parts} if other is not None else {}
    label = next(told.label for told in (other, first) if told is not None)
    details = " instead of ".join(told.detail or "nothing" for told in (other, first) if told is not None)
    if mine or theirs:
        parts = tuple(_difference(mine.get(key), theirs.get(key)) for key in dict.fromkeys([*mine, *theirs]))
        return Explanation(label, sum(part.value for part in parts), "", parts)
    value = (other.value if other is not None else 0.0) - (first.value if first is not None else 0.0)
    return Explanation(label, value, details)
