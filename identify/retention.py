"""Retention index: from a ladder of n-alkanes, on which kind of column, and can a stated value be believed?

Question answered: "where does this peak lie between the n-alkanes, and is a library's index usable?" Not for: deciding whether an
index speaks for a candidate (`identify.evidence.retention_check`).

n-Alkane CnH2n+2 has index 100·n by definition. Temperature-programmed runs use the linear form (van den Dool & Kratz 1963,
J. Chromatogr. 11, 463), isothermal ones the logarithmic form (Kováts 1958).
"""

from __future__ import annotations

import math
import re
from bisect import bisect_right
from collections.abc import Iterable, Sequence
from dataclasses import dataclass

from identify.errors import FormatError, InputError, quote
from identify.records import Entry

LOWEST_INDEX = 100.0
HIGHEST_INDEX = 6000.0
"""Methane, and about the heaviest n-alkane that leaves a column."""


@dataclass(frozen=True, slots=True)
class Ladder:
    """n-Alkane retention times.

    Parameters
    ----------
    carbons : tuple of int
        Carbon numbers, increasing; gaps allowed.
    times : tuple of float
        Retention times in one unit, increasing.

    Raises
    ------
    InputError
        For fewer than two alkanes, unequal lengths, or times that do not rise with the carbon number.
    """

    carbons: tuple[int, ...]
    times: tuple[float, ...]

    def __post_init__(self) -> None:
        if len(self.carbons) != len(self.times) or len(self.carbons) < 2:
            raise InputError(
                "ladder", found=f"{len(self.carbons)} alkanes", expected="at least two, each with one time"
            )
        for lower, upper, early, late in zip(self.carbons, self.carbons[1:], self.times, self.times[1:], strict=False):
            if upper <= lower or not late > early:
                raise InputError(
                    "ladder",
                    found=f"C{upper} at {late:g} after C{lower} at {early:g}",
                    expected="times that rise with the carbon number, each alkane once",
                    hint="Check the assignment of the alkane peaks.",
                )
        if not (self.times[0] > 0 and math.isfinite(self.times[-1]) and self.carbons[0] >= 1):
            raise InputError(
                "ladder", found=f"C{self.carbons[0]} at {self.times[0]:g}", expected="positive, finite times"
            )

    def bracket(self, time: float) -> int | None:
        """Position of the alkane at or before `time` that has a right neighbour; None outside the ladder."""
        if not self.times[0] <= time <= self.times[-1]:
            return None
        return min(bisect_right(self.times, time) - 1, len(self.times) - 2)


LADDER_LINE = re.compile(r"^\s*(?:n-?)?C?(\d{1,3})\s*[,;\t ]\s*([0-9]*\.?[0-9]+)\s*$", re.IGNORECASE)


def parse_ladder(text: str, where: str = "ladder") -> Ladder:
    """Ladder from lines of carbon number and retention time, in any order.

    Parameters
    ----------
    text : str
        One alkane a line: ``C10 8.00``, ``10,8.00`` or tab-separated; ``#`` starts a comment; a heading line without digits is
        skipped.
    where : str
        File name for messages.

    Returns
    -------
    Ladder
        Times in the unit of the text.

    Raises
    ------
    FormatError
        For a line that is neither, or an alkane given twice.
    InputError
        When the times do not rise with the carbon number.

    Examples
    --------
    >>> parse_ladder("C10 8.00\\nC12 11.00").times
    (8.0, 11.0)
    """
    pairs: dict[int, float] = {}
    for number, line in enumerate(text.splitlines(), start=1):
        content = line.split("#", 1)[0].strip()
        if not content or not any(character.isdigit() for character in content):
            continue
        match = LADDER_LINE.match(content)
        if not match:
            raise FormatError(
                "ladder line",
                where=f"{where}:{number}",
                found=quote(content),
                expected="a carbon number and a time, like 'C10 8.00'",
            )
        carbons = int(match.group(1))
        if carbons in pairs:
            raise FormatError(
                "ladder line", where=f"{where}:{number}", found=f"C{carbons} again", expected="each alkane once"
            )
        pairs[carbons] = float(match.group(2))
    return build_ladder(pairs.items())


def build_ladder(pairs: Iterable[tuple[int, float]]) -> Ladder:
    """Ladder from (carbon number, time) pairs in any order.

    Parameters
    ----------
    pairs : iterable of (int, float)

    Returns
    -------
    Ladder

    Raises
    ------
    InputError
        When they make no ladder.
    """
    ordered = sorted(pairs)
    return Ladder(tuple(carbons for carbons, _ in ordered), tuple(time for _, time in ordered))


def linear_index(time: float, ladder: Ladder) -> float | None:
    """Linear (temperature-programmed) retention index of van den Dool & Kratz.

    Parameters
    ----------
    time : float
        Total retention time, in the unit of the ladder.
    ladder : Ladder

    Returns
    -------
    float or None
        None outside the ladder: nothing is extrapolated.

    Notes
    -----
    ``I = 100 [n + (N − n)(t − t_n)/(t_N − t_n)]`` between the bracketing alkanes n < N, which need not be neighbours.

    Examples
    --------
    >>> round(linear_index(9.25, build_ladder([(10, 8.0), (12, 11.0)])), 2)
    1083.33
    """
    place = ladder.bracket(time)
    if place is None:
        return None
    lower, upper = ladder.carbons[place], ladder.carbons[place + 1]
    early, late = ladder.times[place], ladder.times[place + 1]
    return 100.0 * (lower + (upper - lower) * (time - early) / (late - early))


def kovats_index(time: float, ladder: Ladder, dead_time: float) -> float | None:
    """Isothermal retention index of Kováts.

    Parameters
    ----------
    time : float
        Total retention time, in the unit of the ladder.
    ladder : Ladder
    dead_time : float
        Time of an unretained compound, below every alkane's.

    Returns
    -------
    float or None
        None outside the ladder, or when `dead_time` is not below the first alkane's time.

    Notes
    -----
    ``I = 100 [n + (N − n)(log t' − log t'_n)/(log t'_N − log t'_n)]`` with adjusted times ``t' = t − t_0``.

    Examples
    --------
    >>> round(kovats_index(15.7, build_ladder([(8, 14.3), (9, 18.5)]), 0.5), 1)
    836.4
    """
    place = ladder.bracket(time)
    if place is None or dead_time < 0 or dead_time >= ladder.times[0]:
        return None
    lower, upper = ladder.carbons[place], ladder.carbons[place + 1]
    here, early, late = (math.log(value - dead_time) for value in (time, ladder.times[place], ladder.times[place + 1]))
    return 100.0 * (lower + (upper - lower) * (here - early) / (late - early))


BRAND = r"(?:DB|HP|RTX|RXI|ZB|OV|SPB|BPX?|CP-?SIL|PTX|INERTCAP|VF|TG|SE|EQUITY|MXT|AT|TR|OPTIMA|ULTRA|SLB|PE|RTI)-?\s?"
PHASES: tuple[tuple[str, str], ...] = (
    ("polar", r"WAX|FFAP|PEG|CARBOWAX|POLYETHYLENE GLYCOL|INNOWAX|STABILWAX|SP-?2340|SP-?2560|CYANOPROPYLSILICONE|BPX-?70"),
    ("semi-polar", BRAND + r"(?:17|19|24|35|50|200|210|225|624|1301|1701)(?!\d)"),
    ("semi-polar", r"(?:50|35|20|14) ?% ?(?:DI)?PHENYL|CYANOPROPYLPHENYL|(?:SEMI|MID)-?POLAR"),
    ("non-polar", BRAND + r"(?:101|1|2|3|5|8|30|52|54)(?!\d)"),
    ("non-polar", r"(?<!\d)5 ?% ?(?:DI)?PHENYL|DIMETHYL ?(?:POLY)?SILOXANE|METHYL ?SILICONE|SQUALANE|APIEZON|NON-?POLAR"),
    ("polar", r"(?<!NON-)(?<!NON)(?<!SEMI-)(?<!SEMI)\bPOLAR"),
)  # fmt: skip
"""Column names by phase class, first match wins: polyethylene glycol and cyano phases; 14–50 % phenyl or cyanopropyl; 0–5 %
phenyl methylpolysiloxane (common practice)."""


def phase_class(column: str) -> str:
    """Phase class of a column name: `non-polar`, `semi-polar`, `polar`, or empty when the name does not tell.

    Parameters
    ----------
    column : str
        Column as a record states it.

    Returns
    -------
    str

    Notes
    -----
    Indices are comparable within a class only: from a methylpolysiloxane to a polyethylene glycol they differ by hundreds.

    Examples
    --------
    >>> phase_class("DB-5MS, 30 m x 0.25 mm"), phase_class("DB-17MS"), phase_class("DB-WAX"), phase_class("column 7")
    ('non-polar', 'semi-polar', 'polar', '')
    """
    text = column.upper()
    return next((name for name, pattern in PHASES if re.search(pattern, text)), "")


def doubt_about_index(index: float | None, time_s: float | None = None) -> str:
    """Why a stated retention index should not be used; empty when nothing speaks against it.

    Parameters
    ----------
    index : float or None
        Stated index; None for "not stated".
    time_s : float or None
        Retention time in seconds, where stated.

    Returns
    -------
    str
        A reason in words.

    Examples
    --------
    >>> doubt_about_index(910.38, 910.38)
    'the index equals the retention time'
    >>> doubt_about_index(1182.0)
    ''
    """
    if index is None:
        return "no index is stated"
    if not math.isfinite(index):
        return "the index is not a number"
    if index == 0:
        return "the index is 0"
    if not LOWEST_INDEX <= index <= HIGHEST_INDEX:
        return f"the index lies outside {LOWEST_INDEX:g}–{HIGHEST_INDEX:g}"
    if time_s is not None and any(abs(index - value) < 0.005 for value in (time_s, time_s / 60.0)):
        return "the index equals the retention time"
    return ""


SERIES_LIMIT = 60.0
"""Index units a member of a homologous series may lie off the line through the others (judgement: CH2 is about 100)."""


def series_key(smiles: str) -> tuple[str, int]:
    """Homologous series of a SMILES text, and the number of chain carbons within it.

    Parameters
    ----------
    smiles : str
        Any SMILES; runs of two or more aliphatic carbons are the chains.

    Returns
    -------
    key : str
        The text with every run shortened to ``C*``; empty when there is no run.
    length : int
        Carbons in the runs together.

    Examples
    --------
    >>> series_key("CCCCCO"), series_key("CCCO")
    (('C*O', 5), ('C*O', 3))
    """
    runs = [match.group() for match in re.finditer(r"(?<![\[%])C{2,}(?![a-z])", smiles)]
    if not runs:
        return "", 0
    return re.sub(r"(?<![\[%])C{2,}(?![a-z])", "C*", smiles), sum(map(len, runs))


def out_of_order(series: Sequence[tuple[int, float]]) -> tuple[int, ...]:
    """Positions in a homologous series whose index does not fit the others.

    Parameters
    ----------
    series : sequence of (chain length, index)
        Members on one phase class, in any order.

    Returns
    -------
    tuple of int
        Positions in `series`. With two members that are out of order, both; with three or more, those further than
        `SERIES_LIMIT` from the robust line (median slope, median intercept) while their neighbours are not.

    Examples
    --------
    >>> out_of_order([(5, 760.0), (6, 860.0), (7, 500.0), (8, 1060.0)])
    (2,)
    >>> out_of_order([(5, 760.0), (6, 700.0)])
    (0, 1)
    """
    if len({length for length, _ in series}) < 2:
        return ()
    if len(series) == 2:
        (short, first), (long, second) = sorted(series)
        return (0, 1) if long > short and second <= first else ()
    slopes = sorted(
        (second - first) / (long - short)
        for place, (short, first) in enumerate(series)
        for long, second in series[place + 1 :]
        if long != short
    )
    slope = slopes[len(slopes) // 2]
    rest = [index - slope * length for length, index in series]
    middle = sorted(rest)[len(rest) // 2]
    return tuple(place for place, value in enumerate(rest) if abs(value - middle) > SERIES_LIMIT)


def find_suspect_indices(entries: Iterable[Entry]) -> dict[int, str]:
    """Entries of a library whose retention index should not be used, with the reason.

    Parameters
    ----------
    entries : iterable of Entry

    Returns
    -------
    dict of int to str
        By entry id. Entries without an index are not listed.

    Notes
    -----
    Besides single values (`doubt_about_index`), homologues are compared: entries whose SMILES differ in the length of carbon
    chains only, measured as the same derivative on the same phase class, must rise by about 100 units for each CH2.
    """
    suspects: dict[int, str] = {}
    series: dict[tuple[str, str, str], list[tuple[int, float, int]]] = {}
    for entry in entries:
        retention = entry.retention
        if retention.index is None:
            continue
        doubt = doubt_about_index(retention.index, retention.time_s)
        if doubt:
            suspects[entry.id] = doubt
            continue
        key, length = series_key(entry.identity.smiles)
        phase = retention.phase or phase_class(retention.column)
        if key and phase:
            series.setdefault((key, phase, entry.measured_as), []).append((length, retention.index, entry.id))
    for members in series.values():
        for place in out_of_order([(length, index) for length, index, _ in members]):
            suspects[members[place][2]] = "the index is out of order within its homologous series"
    return suspects
