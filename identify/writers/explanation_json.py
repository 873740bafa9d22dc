"""The explanation of a number as JSON, rounded so that its parts still add up."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from functools import lru_cache
from itertools import chain, islice
from json.encoder import encode_basestring

import numpy as np

from identify.records import Explanation, Terms


def write_explanations(trees: Sequence[Explanation], decimals: int) -> list[str]:
    """JSON text of each tree as `round_explanation` rounds it.

    Parameters
    ----------
    trees : sequence of Explanation
    decimals : int
        Decimals kept, 0–12.

    Returns
    -------
    list of str

    Raises
    ------
    ValueError
        If a value is not finite.

    Examples
    --------
    >>> write_explanations([Explanation("all", 0.25)], 1)
    ['{"label": "all", "value": 0.2, "detail": "", "parts": []}']
    """
    scale = 10**decimals
    return _texts(trees, [round(tree.value * scale) for tree in trees], scale)


def round_explanation(explanation: Explanation, decimals: int) -> Explanation:
    """The same tree with every value rounded to `decimals`, so that rounded parts still add up to rounded values.

    Parameters
    ----------
    explanation : Explanation
    decimals : int
        Decimals kept, 0–12.

    Returns
    -------
    Explanation

    Notes
    -----
    Top down: the root is rounded as usual; below it, each value is rounded down and the missing units of the last digit go to the
    parts with the largest remainders (largest-remainder apportionment). No part moves by more than one unit of the last digit.

    Examples
    --------
    >>> third = [Explanation(name, 1 / 3) for name in "abc"]
    >>> tree = round_explanation(Explanation("all", 1.0, parts=tuple(third)), decimals=1)
    >>> [part.value for part in tree.parts]
    [0.4, 0.3, 0.3]
    """
    scale = 10**decimals
    return _rounded(explanation, round(explanation.value * scale), scale)


def _rounded(explanation: Explanation, units: int, scale: int) -> Explanation:
    shares = _share_units([explanation], [units], scale)
    parts = tuple(_rounded(part, share, scale) for part, share in zip(explanation.parts, shares, strict=True))
    return Explanation(explanation.label, units / scale, explanation.detail, parts)


def _share_units(trees: Sequence[Explanation], units: Sequence[int], scale: int) -> list[int]:
    """Units of the last digit for the parts of all trees, one after the other, adding up to `units` (`round_explanation`)."""
    sizes = np.array([len(tree.parts) for tree in trees], dtype=np.int64)
    values = np.array(list(chain.from_iterable(map(_values_of, trees)))) * scale
    if not np.isfinite(values).all():
        raise ValueError("a part of an explanation is no number, which JSON cannot say")
    lower = np.floor(values)
    owner = np.repeat(np.arange(sizes.size), sizes)
    missing = np.array(units) - np.bincount(owner, lower, minlength=sizes.size).astype(np.int64)
    by_remainder = np.lexsort((lower - values, owner))  # stable: of equal remainders the first comes first
    place = np.empty_like(owner)
    place[by_remainder] = np.arange(owner.size) - np.repeat(np.cumsum(sizes) - sizes, sizes)
    laps, rest = np.divmod(np.maximum(missing, 0), np.maximum(sizes, 1))
    shares: list[int] = (lower.astype(np.int64) + laps[owner] + (place < rest[owner])).tolist()
    return shares


def _values_of(tree: Explanation) -> Sequence[float]:
    parts = tree.parts
    return parts.values if isinstance(parts, Terms) else [part.value for part in parts]


def _texts(trees: Sequence[Explanation], units: Sequence[int], scale: int) -> list[str]:
    """JSON of trees whose roots are given `units` / `scale`, written straight away and level by level.

    Explanations are half of a result; by way of dicts of rounded trees the whole result takes twice as long (measured).
    """
    shares = iter(_share_units(trees, units, scale))
    of_tree = [list(islice(shares, len(tree.parts))) for tree in trees]
    branches = [
        (tree.parts, own) for tree, own in zip(trees, of_tree, strict=True) if not isinstance(tree.parts, Terms)
    ]
    below: Iterator[str] = iter(())
    if any(parts for parts, _ in branches):
        children = [part for parts, _ in branches for part in parts]
        below = iter(_texts(children, [share for _, own in branches for share in own], scale))
    texts = []
    for tree, total, own in zip(trees, units, of_tree, strict=True):
        parts = tree.parts
        told = _terms_text(parts, own, scale) if isinstance(parts, Terms) else ", ".join(islice(below, len(parts)))
        label, detail = encode_basestring(tree.label), encode_basestring(tree.detail)
        texts.append(f'{{"label": {label}, "value": {total / scale}, "detail": {detail}, "parts": [{told}]}}')
    return texts


def _terms_text(terms: Terms, shares: Sequence[int], scale: int) -> str:
    texts = [
        f'{head}{share / scale}, "detail": {encode_basestring(detail)}, "parts": []}}'
        for head, share, detail in zip(_heads(terms.labels), shares, terms.details, strict=True)
    ]
    return ", ".join(texts)


@lru_cache(maxsize=4096)
def _heads(labels: tuple[str, ...]) -> tuple[str, ...]:
    """Beginnings of the JSON of explanations; the same labels stand under every candidate."""
    return tuple(f'{{"label": {encode_basestring(label)}, "value": ' for label in labels)
