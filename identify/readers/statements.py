"""Metadata statements that several formats share: energy, scan range, retention, ionization, derivative.

Each function takes the words of the source and gives a typed value, or nothing together with a note that keeps the
words and says why they were not used.
"""

from __future__ import annotations

import re
from collections.abc import Sequence

from identify.readers.numbers import find_number, parse_number
from identify.records import Retention

IONIZATIONS = frozenset(
    {"EI", "CI", "NCI", "PCI", "FI", "FD", "ESI", "NESI", "APCI", "APPI", "APGC", "MALDI", "FAB", "SIMS", "LDI"}
    | {"DART", "DESI", "LIT", "TSP", "ICP", "SPI"}
)
"""Ionization codes of the instrument types in the open record format, and the usual abbreviations beside them."""

IONIZATION_TERMS = {
    "electron ionization": "EI",
    "chemical ionization": "CI",
    "field ionization": "FI",
    "field desorption": "FD",
    "electrospray ionization": "ESI",
    "microelectrospray": "ESI",
    "nanoelectrospray": "ESI",
    "atmospheric pressure ionization": "API",
    "atmospheric pressure chemical ionization": "APCI",
    "atmospheric pressure photoionization": "APPI",
    "fast atom bombardment ionization": "FAB",
    "matrix-assisted laser desorption ionization": "MALDI",
    "atmospheric pressure matrix-assisted laser desorption ionization": "MALDI",
    "desorption electrospray ionization": "DESI",
    "laser desorption ionization": "LDI",
    "secondary ionization": "SIMS",
    "photoionization": "PI",
    "multiphoton ionization": "MPI",
    "resonance enhanced multiphoton ionization": "REMPI",
    "thermal ionization": "TI",
    "inductively coupled plasma": "ICP",
}
"""Names of the ionization types in the controlled vocabulary of mass spectrometry (psi-ms) → code."""

_MAX_WORDS = 100
"""Characters of a statement that are looked at: more are no statement, and would cost time."""

_EI_WORDS = re.compile(r"\b(?:EI\b|electron[ -]?(?:impact|ioni[sz]ation))|^EI[+-]?$", re.IGNORECASE)
_CI_WORDS = re.compile(r"\b(?:[PN]?CI\b|chemical[ -]?ioni[sz]ation)|^[PN]?CI[+-]?$", re.IGNORECASE)
_RANGE = re.compile(r"(?<![\d.])(\d+(?:\.\d+)?)\s*(?:-|–|to|\.\.|,)\s*(\d+(?:\.\d+)?)(?![\d.])")
_TIME = re.compile(r"([+-]?\d+(?:\.\d+)?(?:[eE][+-]?\d+)?)\s*([A-Za-z]*)")
_TITLE_TIME = re.compile(r"\bRT:\s*(\d+(?:\.\d+)?)\s*(s|sec|min)\b")
_SECONDS = {"s": 1.0, "sec": 1.0, "secs": 1.0, "second": 1.0, "seconds": 1.0, "h": 3600.0, "ms": 0.001} | dict.fromkeys(
    ("m", "min", "mins", "minute", "minutes"), 60.0
)
_GROUP = r"(?:\d+|[nx])?\s*(?:TMS|TBDMS|MEOX|TFA|PFP|HFB|AC|ACETYL|ME|METHYL|MO|MOX)"
_DERIVATIVE = re.compile(rf"{_GROUP}(?:\s*[,;+/ ]\s*{_GROUP})*(?:[ -]derivative)?", re.IGNORECASE)


def ionization_of_instrument_type(instrument_type: str) -> str:
    """Ionization code inside an instrument type, or the empty string.

    Parameters
    ----------
    instrument_type : str
        ``(separation-)ionization-analyser``.

    Returns
    -------
    str
        Such as ``EI``; empty where no part is a known ionization.

    Examples
    --------
    >>> ionization_of_instrument_type("GC-EI-TOF"), ionization_of_instrument_type("CI-B")
    ('EI', 'CI')
    """
    for part in instrument_type.upper().split("-"):
        if part in IONIZATIONS:
            return part
    return ""


def read_ionization(text: str) -> tuple[str, str]:
    """Ionization code and polarity that a free statement such as ``EI+`` or ``Electron ionization`` gives.

    Parameters
    ----------
    text : str
        Words of the source.

    Returns
    -------
    tuple of str
        Code (``EI``, ``CI``, the words themselves where unknown; empty for empty) and ``positive``, ``negative`` or
        the empty string.

    Examples
    --------
    >>> read_ionization("EI+"), read_ionization("electron impact, 70 eV")
    (('EI', 'positive'), ('EI', ''))
    """
    text = text.strip()
    polarity = {"+": "positive", "-": "negative"}.get(text[-1:], "")
    bare = text.rstrip("+-").strip()
    if _EI_WORDS.search(bare):
        return "EI", polarity
    if _CI_WORDS.search(bare):
        return "CI", polarity
    return bare.upper() if bare.upper() in IONIZATIONS else bare, polarity


def read_energy(text: str) -> tuple[float | None, dict[str, str]]:
    """Ionization energy in eV, and a note where the words are something else.

    Parameters
    ----------
    text : str
        ``70 eV``, ``70``, ``70 V`` (electrons accelerated by 70 V have 70 eV).

    Returns
    -------
    tuple of (float or None, dict)
        The note keeps the words of a value that is not an energy of electrons (0 or less, kilovolts, no number).

    Examples
    --------
    >>> read_energy("70 eV")
    (70.0, {})
    >>> read_energy("8 kV")
    (None, {'ionization energy as stated': '8 kV'})
    """
    if not text:
        return None, {}
    tidy = " ".join(text[:_MAX_WORDS].split())
    match = re.fullmatch(r"([0-9.]+) ?(?:eV|V|volts?|electron ?volts?)? ?\.?", tidy, re.IGNORECASE)
    value = None if match is None else parse_number(match.group(1))
    if value is None or value <= 0:
        return None, {"ionization energy as stated": text}
    return value, {}


def read_mass_range(text: str) -> tuple[float | None, float | None]:
    """Lowest and highest m/z of a scan range statement such as ``35-500``; None twice where there is none.

    Examples
    --------
    >>> read_mass_range("m/z 35 - 500"), read_mass_range("full")
    ((35.0, 500.0), (None, None))
    """
    match = _RANGE.search(text[:200])
    if match is None:
        return None, None
    lowest, highest = float(match.group(1)), float(match.group(2))
    return (lowest, highest) if 0 < lowest < highest < 1e6 else (None, None)


def read_time_s(text: str, *, default_unit: str = "") -> float | None:
    """Time in seconds that ``12.5 min``, ``750 sec`` or a number with `default_unit` states, or None.

    Parameters
    ----------
    text : str
        Words of the source; what stands behind number and unit is ignored.
    default_unit : str
        ``s`` or ``min`` where the format fixes the unit; empty where a bare number means nothing.

    Examples
    --------
    >>> read_time_s("12.5 min."), read_time_s("7.2"), read_time_s("7.2", default_unit="min")
    (750.0, None, 432.0)
    """
    match = _TIME.match(text.strip()[:100])
    if match is None:
        return None
    value, unit = parse_number(match.group(1)), match.group(2).lower() or default_unit
    if value is None or value < 0 or unit not in _SECONDS:
        return None
    return value if _SECONDS[unit] == 1.0 else round(value * _SECONDS[unit], 9)


def read_retention(
    *, time: str, indices: Sequence[tuple[str, str]], column: str, time_hint: str = "", default_unit: str = ""
) -> tuple[Retention, dict[str, str]]:
    """Retention data as far as they can be believed, and notes on what was left out.

    Parameters
    ----------
    time : str
        Retention time in the words of the source.
    indices : sequence of (str, str)
        ``(kind, words)`` in order of preference; empty words are skipped.
    column : str
        Column in the words of the source; kept as it is (its phase class is read where it is needed).
    time_hint : str
        Record title, which may give the unit (``RT: 294.78 s``) that the time itself lacks.
    default_unit : str
        Unit of a bare time, where the format fixes one.

    Returns
    -------
    tuple of (Retention, dict)
        An index that is no number, not above 0, or equal to the retention time is not used; the note says so.

    Examples
    --------
    >>> read_retention(time="7.5 min", indices=[("kovats", "0"), ("", "1065")], column="")[0].index
    1065.0
    """
    notes: dict[str, str] = {}
    time_s = read_time_s(time, default_unit=default_unit)
    stated = find_number(time)
    if time and time_s is None:
        hint = _TITLE_TIME.search(time_hint)
        if hint is not None and stated is not None and parse_number(hint.group(1)) == stated:
            time_s = read_time_s(f"{stated} {hint.group(2)}")
        else:
            notes["retention time as stated"] = f"{time} (not used: no unit)" if stated is not None else time
    for kind, words in indices:
        if not words:
            continue
        if words.endswith(" (linear)"):
            kind, words = "linear", words.removesuffix(" (linear)")
        value = parse_number(words)
        reason = _doubt_index(value, stated)
        if not reason:
            return Retention(time_s, value, kind, column), notes
        notes["retention index as stated"] = f"{words} (not used: {reason})"
    return Retention(time_s=time_s, column=column), notes


def _doubt_index(value: float | None, time: float | None) -> str:
    if value is None:
        return "not a number"
    if value <= 0:
        return "an index is above 0"
    if time is not None and value == time:
        return "equal to the retention time"
    return ""


def read_derivative_segments(title: str) -> str:
    """Derivative that a segment of a record title states, in its own words; empty for none.

    Parameters
    ----------
    title : str
        ``name; instrument type; …``: the first segment, the compound's name, is not looked at, since a compound that
        is itself a silyl ether is no derivative.

    Examples
    --------
    >>> read_derivative_segments("Citric acid; GC-EI-TOF; MS; 4 TMS; BP:73")
    '4 TMS'
    >>> read_derivative_segments("TRIMETHYLSILYL ACETATE; EI-B; MS")
    ''
    """
    found = [segment.strip() for segment in title.split(";")[1:]]
    words = [segment for segment in found if len(segment) <= _MAX_WORDS and _DERIVATIVE.fullmatch(segment)]
    return "; ".join(re.sub(r"[ -]derivative$", "", segment, flags=re.IGNORECASE) for segment in words)
