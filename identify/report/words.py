"""Numbers and foreign text as a reader meets them, the same on the terminal, on the page and on paper."""

from __future__ import annotations

import unicodedata
from collections.abc import Iterable, Sequence
from pathlib import PurePath

from identify.ranking.claim import percent
from identify.records import Claim, ClaimLevel, EvidenceItem, Query, Rejection, Verdict

MAX_TEXT, LONG_TEXT = 300, 2000
"""Longest name and longest sentence shown, in characters."""
NONE = "–"
"""Shown where a source states nothing."""
NO_BREAK = "\u00a0"
"""Between a number and its unit, so that a line never ends there; the terminal prints a plain space."""

VERDICT_MARKS = {
    Verdict.AGREES: "✓",
    Verdict.CONFLICTS: "✗",
    Verdict.INCONCLUSIVE: "≈",
    Verdict.NOT_ASSESSED: "○",
}
PLAIN_MARKS = {
    Verdict.AGREES: "y",
    Verdict.CONFLICTS: "x",
    Verdict.INCONCLUSIVE: "?",
    Verdict.NOT_ASSESSED: "o",
}
"""For terminals whose encoding lacks the marks."""

LEVEL_MEANINGS = {
    ClaimLevel.CONFIRMED: "An authentic standard, measured here by the same method, agrees. Only a person sets this level.",
    ClaimLevel.SUPPORTED: "The library match and at least one independent kind of evidence agree; none conflicts.",
    ClaimLevel.TENTATIVE: "The library match alone.",
    ClaimLevel.ISOMER_GROUP: "One of several isomers that these data cannot tell apart; those in the library are named, those "
    "without an entry counted.",
    ClaimLevel.CLASS: "A substructure or compound class only.",
    ClaimLevel.NO_CLAIM: "Nothing in the library can be defended as an answer.",
}

CAUTIONS = (
    "A name found by comparing spectra is tentative. It is no confirmation: that takes an authentic standard measured by the "
    "same method.",
    "Isomers can give the same spectrum, and an isomer without an entry cannot be named.",
    "Probabilities hold for spectra like those they were calibrated on; mixtures, background and unusual instruments weaken "
    "them.",
    "Local codes, accredited methods and licensed practice govern how a result may be used; this report does not replace them.",
)


def probability_text(probability: float) -> str:
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
    >>> [probability_text(value).replace(NO_BREAK, " ") for value in (0.874, 0.9999, 0.0)]
    ['87 %', '> 99 %', '< 1 %']
    """
    return percent(probability).replace(" ", NO_BREAK)


def claim_probability_text(claim: Claim) -> str:
    """Probability of what is claimed; a dash where nothing is, so that no number is read as one of a name."""
    return NONE if claim.level is ClaimLevel.NO_CLAIM else probability_text(claim.probability)


def query_name(query: Query) -> str:
    """What a query is called: its name or title, else where it was read."""
    record = query.record
    return visible_text(record.identity.name or record.title) or source_text(record.source.path, record.source.line)


def ions_text(ions: Iterable[tuple[float, float]], limit: int) -> str:
    """The tallest ions with their relative intensities, tallest first, the rest counted.

    Parameters
    ----------
    ions : iterable of (float, float)
        m/z and relative intensity in percent.
    limit : int
        Most ions named.

    Returns
    -------
    str

    Examples
    --------
    >>> ions_text([(15.0, 20.0), (43.0, 100.0), (58.0, 34.0)], 2).replace(NO_BREAK, " ")
    '43 (100 %), 58 (34 %) and 1 smaller'
    """
    order = sorted(ions, key=lambda ion: (-ion[1], ion[0]))
    named = ", ".join(f"{mz_text(mz)} ({relative_text(value)})" for mz, value in order[:limit])
    return (named or "none") + (f" and {len(order) - limit} smaller" if len(order) > limit else "")


def rejection_text(item: Rejection) -> str:
    """What was found in an input that was left out, what was expected, and what to do about it."""
    facts = [f"found {visible_text(item.found)}"] if item.found else []
    facts += [f"expected {visible_text(item.expected)}"] if item.expected else []
    return " ".join(part for part in (sentence(", ".join(facts)), visible_text(item.hint)) if part)


def score_text(score: float) -> str:
    """A score in [0, 1] with three decimals; 1.000 only where the score is 1.

    Parameters
    ----------
    score : float

    Returns
    -------
    str

    Examples
    --------
    >>> score_text(0.98149), score_text(0.99996), score_text(1.0)
    ('0.981', '0.999', '1.000')
    """
    return "1.000" if score >= 1.0 - 1e-9 else f"{min(score, 0.999):.3f}"


def signed_text(value: float) -> str:
    """A log-odds value with its sign and two decimals; a true minus sign, and no signed zero.

    Parameters
    ----------
    value : float

    Returns
    -------
    str

    Examples
    --------
    >>> signed_text(1.234), signed_text(-0.5), signed_text(-0.001)
    ('+1.23', '−0.50', '0.00')
    """
    text = f"{value:+.2f}"
    return "0.00" if text in ("+0.00", "-0.00") else text.replace("-", "−")


def minutes_text(time_s: float | None) -> str:
    """A retention time in minutes.

    Parameters
    ----------
    time_s : float or None
        Seconds.

    Returns
    -------
    str

    Examples
    --------
    >>> minutes_text(399.0).replace(NO_BREAK, " "), minutes_text(None)
    ('6.65 min', '–')
    """
    return NONE if time_s is None else f"{time_s / 60.0:.2f}{NO_BREAK}min"


def mz_text(mz: float) -> str:
    """An m/z: an integer as such, an accurate one with four decimals.

    Parameters
    ----------
    mz : float

    Returns
    -------
    str

    Examples
    --------
    >>> mz_text(120.0), mz_text(120.05751)
    ('120', '120.0575')
    """
    return f"{mz:.0f}" if float(mz).is_integer() else f"{mz:.4f}"


def relative_text(percent: float) -> str:
    """An intensity relative to the base peak, in percent, two digits where it is small.

    Parameters
    ----------
    percent : float

    Returns
    -------
    str

    Examples
    --------
    >>> [relative_text(value).replace(NO_BREAK, " ") for value in (85.2, 2.71, 0.04)]
    ['85 %', '2.7 %', '0.04 %']
    """
    decimals = 0 if percent >= 9.95 else 1 if percent >= 0.95 else 2
    return f"{percent:.{decimals}f}{NO_BREAK}%"


def visible_text(text: object, limit: int = MAX_TEXT) -> str:
    """One line of text in which nothing is hidden: controls and direction overrides are spelled out, length is bounded.

    Parameters
    ----------
    text : object
        Text from a file, possibly hostile.
    limit : int
        Longest text shown; what is longer ends with an ellipsis.

    Returns
    -------
    str

    Notes
    -----
    Names come from files that others wrote. An escape sequence could repaint a terminal, a direction override could turn a name
    around, a lone surrogate could stop the report from being written.

    Examples
    --------
    >>> visible_text("tolu\\x1b[31mene\\n")
    'tolu⟨1B⟩[31mene'
    """
    whole = " ".join(str(text)[: 4 * limit].split())
    # What is printable holds nothing hidden; nearly every text is.
    shown = whole if whole.isprintable() else "".join(_visible(character) for character in whole)
    return shown if len(shown) <= limit else shown[: limit - 1] + "…"


def _visible(character: str) -> str:
    # Cc controls, Cf invisible formatting, Cs lone surrogates, Co private use, Cn unassigned.
    hidden = unicodedata.category(character) in ("Cc", "Cf", "Cs", "Co", "Cn")
    return f"⟨{ord(character):02X}⟩" if hidden else character


def sentence(text: str) -> str:
    """Text from another room as a sentence: visible, bounded, with a full stop.

    Parameters
    ----------
    text : str

    Returns
    -------
    str
        Empty for empty text.

    Examples
    --------
    >>> sentence("the molecular mass"), sentence("Done."), sentence("")
    ('the molecular mass.', 'Done.', '')
    """
    shown = visible_text(text, LONG_TEXT)
    return shown if not shown or shown.endswith((".", "!", "?", "…")) else f"{shown}."


def compound_name(name: str, accession: str) -> str:
    """Name of a compound for display; where the source gives none, the accession says which entry is meant.

    Parameters
    ----------
    name, accession : str

    Returns
    -------
    str
    """
    return visible_text(name) or f"unnamed ({visible_text(accession) or 'no accession'})"


def file_name(path: str) -> str:
    """Last part of a path, for display where the whole is told elsewhere.

    Parameters
    ----------
    path : str

    Returns
    -------
    str

    Examples
    --------
    >>> file_name("/data/libraries/lab.ionlib")
    'lab.ionlib'
    """
    return visible_text(PurePath(path).name or path)


def source_text(path: str, line: int | None) -> str:
    """File name and line of a source; the folder is left out.

    Parameters
    ----------
    path : str
    line : int or None

    Returns
    -------
    str

    Examples
    --------
    >>> source_text("/data/run 3/unknowns.jdx", 12)
    'unknowns.jdx, line 12'
    """
    name = file_name(path)
    return name if line is None else f"{name}, line {line}"


def count_verdicts(evidence: Sequence[EvidenceItem]) -> tuple[tuple[Verdict, int], ...]:
    """How often each verdict was given, all four in their fixed order.

    Parameters
    ----------
    evidence : sequence of EvidenceItem

    Returns
    -------
    tuple of (Verdict, int)
    """
    given = [item.verdict for item in evidence]
    return tuple((verdict, given.count(verdict)) for verdict in Verdict)


def counted(number: int, singular: str, plural: str = "") -> str:
    """A number with its noun.

    Parameters
    ----------
    number : int
    singular, plural : str
        The plural defaults to the singular and an s.

    Returns
    -------
    str

    Examples
    --------
    >>> counted(1, "entry", "entries"), counted(12084, "entry", "entries")
    ('1 entry', '12,084 entries')
    """
    return f"{number:,} {singular if number == 1 else plural or singular + 's'}"
