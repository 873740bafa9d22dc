"""Free name/value metadata → typed record, for the formats that have names but no fixed vocabulary.

One table of spellings serves the name/value exchange format, tables with a heading, MGF and the private labels of
JCAMP-DX. What has no field of its own stays in `extra` under the source's own name: shown, never used.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import replace

from identify.readers.limits import MAX_FIELD_CHARS
from identify.readers.numbers import parse_number
from identify.readers.statements import (
    ionization_of_instrument_type,
    read_energy,
    read_ionization,
    read_mass_range,
    read_retention,
)
from identify.records import Acquisition, FloatArray, Identity, Source, SpectrumRecord

SPELLINGS: Mapping[str, tuple[str, ...]] = {
    "name": ("name", "compoundname", "compound", "chemicalname"),
    "title": ("title", "recordtitle"),
    "synonym": ("synon", "synonym", "synonyms", "syn", "othername", "names", "casname"),
    "formula": ("formula", "molecularformula", "molform", "chemicalformula", "chformula"),
    "smiles": ("smiles", "canonicalsmiles", "computedsmiles", "smilesstring", "smilesformula"),
    "inchi": ("inchi", "computedinchi", "inchicode"),
    "inchikey": ("inchikey",),
    "cas": ("cas", "casno", "casrn", "casnumber", "casregistryno", "casregistrynumber"),
    "accession": ("accession", "db", "dbno", "spectrumid", "recordid", "id"),
    "instrument": ("instrument", "spectrometerdatasystem", "instrumentname", "sourceinstrument"),
    "instrument type": ("instrumenttype", "spectrometertype"),
    "ionization": ("ionization", "ionisation", "ionizationmode", "ionsource", "ionizationtype", "ionizationmethod"),
    "polarity": ("ionmode", "polarity", "ionpolarity"),
    "energy": ("ionizationenergy", "electronenergy", "ionisationenergy", "energyev"),
    "inlet": ("inlet", "inlettype"),
    "ms level": ("mslevel", "spectrumtype", "mstype"),
    "lowest mz": ("lowestmz", "scanwindowlowerlimit"),
    "highest mz": ("highestmz", "scanwindowupperlimit"),
    "scan range": ("scanrange", "massrange", "scanrangemz", "massrangemz"),
    "retention time": ("retentiontime", "rt", "rettime"),
    "retention time in seconds": ("rtinseconds", "retentiontimes", "retentiontimeins", "scanstarttimes"),
    "retention time in minutes": ("rtinminutes", "retentiontimemin", "retentiontimeinmin"),
    "kovats index": ("kovats", "kovatsindex", "kovatsri", "kovatsrti", "kovatsretentionindex"),
    "linear index": ("linearri", "linearretentionindex", "linearindex"),
    "lee index": ("leeindex", "leerti", "leeretentionindex", "leeri"),
    "retention index": ("retentionindex", "ri", "rindex", "retindex"),
    "column phase": ("columnphase",),
    "column": ("column", "columnname", "gccolumn"),
    "derivative": ("derivative", "derivativetype", "derivatization", "derivatizationtype"),
    "licence": ("licence", "license"),
    "authors": ("authors", "author", "contributor"),
    "splash": ("splash",),
    "profile": ("profile", "isprofile"),
    "comments": ("comments", "comment"),
}
"""Field → names it goes by, in lower case without blanks and punctuation, preferred ones first."""

_FIELD_OF = {name: field for field, names in SPELLINGS.items() for name in names}
_INDEX_KINDS = (("kovats", "kovats index"), ("linear", "linear index"), ("lee", "lee index"), ("", "retention index"))
_PHASES = frozenset({"non-polar", "semi-polar", "polar"})
_MAX_NAME_CHARS = 61
_NOTHING = frozenset({"", "N/A", "NA", "n/a", "-"})
_QUOTED_PAIR = re.compile(r'"([A-Za-z][^"=]{0,60})=([^"]*)"')
_BARE_PAIR = re.compile(r'(?<![\w"])([A-Za-z][\w.-]{0,60})=([^\s"]+)')


def bare_name(name: str) -> str:
    """`name` in lower case without blanks and punctuation, the form in which names are compared.

    Examples
    --------
    >>> bare_name("Retention_Index"), bare_name("CAS#")
    ('retentionindex', 'cas')
    """
    return "".join(letter for letter in name.lower() if letter.isalnum())


class NamedFields:
    """Name/value pairs of one record, sorted into known fields and the rest.

    Parameters
    ----------
    pairs : iterable of (str, str)
        Names as the source spells them, in file order; a name may come several times.
    """

    def __init__(self, pairs: Iterable[tuple[str, str]]) -> None:
        self._known: dict[str, list[tuple[str, str]]] = {}
        self._rest: dict[str, list[str]] = {}
        for name, value in pairs:
            self.add(name, value)

    def add(self, name: str, value: str) -> None:
        """Take one more pair."""
        value = cut_field(value.strip())
        field = _FIELD_OF.get(bare_name(name))
        if field is None:
            self._rest.setdefault(name.strip()[:80], []).append(value)
        elif value not in _NOTHING:
            self._known.setdefault(field, []).append((name.strip(), value))

    def has(self, field: str) -> bool:
        """True where the source gives `field`."""
        return field in self._known

    def take(self, field: str) -> str:
        """First value of `field`; the others go to the rest. Empty where there is none."""
        pairs = self._known.pop(field, [])
        for name, value in pairs[1:]:
            if value != pairs[0][1]:
                self._rest.setdefault(name, []).append(value)
        return pairs[0][1] if pairs else ""

    def take_all(self, field: str) -> tuple[str, ...]:
        """All values of `field`, in file order."""
        return tuple(value for _, value in self._known.pop(field, []))

    def add_missing(self, pairs: Iterable[tuple[str, str]]) -> None:
        """Take pairs from a secondary place (a comment) for fields that are still without a value."""
        for name, value in pairs:
            field = _FIELD_OF.get(bare_name(name))
            if field is not None and field != "comments" and field not in self._known and value not in _NOTHING:
                self._known[field] = [(name, cut_field(value))]

    def rest(self) -> dict[str, str]:
        """What was not taken, under the source's names, repeated ones joined by line feeds."""
        for pairs in self._known.values():
            for name, value in pairs:
                self._rest.setdefault(name, []).append(value)
        self._known = {}
        return {name: "\n".join(values) for name, values in self._rest.items()}


def split_statement(text: str, signs: str = ":") -> tuple[str, str] | None:
    """Name and value of a line ``name: value``, or None where it is none.

    Parameters
    ----------
    text : str
        One line; only its first characters are searched, so that a hostile line costs no time.
    signs : str
        Characters that may stand between name and value; the first one found counts.

    Examples
    --------
    >>> split_statement("Num Peaks : 3"), split_statement("43 100")
    (('Num Peaks', '3'), None)
    """
    start = text[: _MAX_NAME_CHARS + 40].lstrip()
    positions = [position for sign in signs if (position := start.find(sign)) > 0]
    name = start[: min(positions)].rstrip() if positions else ""
    if not name or len(name) > _MAX_NAME_CHARS or not (name[0] == "$" or (name[0].isascii() and name[0].isalpha())):
        return None
    return name, text.lstrip()[min(positions) + 1 :].strip()


def pairs_in_comment(text: str) -> list[tuple[str, str]]:
    """Name/value pairs inside a comment, quoted (``"SMILES=CCO"``) or bare (``instrument=trap``).

    Examples
    --------
    >>> pairs_in_comment('"instrument type=GC-EI-Q" RI=1002')
    [('instrument type', 'GC-EI-Q'), ('RI', '1002')]
    """
    text = text[:MAX_FIELD_CHARS]
    quoted = _QUOTED_PAIR.findall(text)
    return quoted + _BARE_PAIR.findall(_QUOTED_PAIR.sub(" ", text))


def record_from_fields(
    fields: NamedFields,
    source: Source,
    mz: FloatArray,
    intensity: FloatArray,
    *,
    comments: Sequence[str] = (),
    is_profile: bool = False,
    default_time_unit: str = "",
) -> SpectrumRecord:
    """Typed record of one spectrum from its peaks and named fields.

    Parameters
    ----------
    fields : NamedFields
        Emptied by this function.
    source : Source
        Where the record stands.
    mz, intensity : ndarray of shape (n_peaks,)
        Peaks in file order.
    comments : sequence of str
        Comments of the format itself, put before those among the fields.
    is_profile : bool
        True where the format says so.
    default_time_unit : str
        Unit of a bare retention time where the format fixes one, else empty: a bare number is then kept in `extra`.

    Returns
    -------
    SpectrumRecord
    """
    stated_comments = fields.take_all("comments")
    for comment in stated_comments:
        fields.add_missing(pairs_in_comment(comment))
    energy_ev, energy_note = read_energy(fields.take("energy"))
    retention, retention_notes = read_retention(
        time=_take_time(fields),
        indices=[(kind, fields.take(field)) for kind, field in _INDEX_KINDS if fields.has(field)],
        column=fields.take("column"),
        default_unit=default_time_unit,
    )
    phase = fields.take("column phase").lower()
    if phase in _PHASES:
        retention = replace(retention, phase=phase)
    names = fields.take_all("name")
    title = fields.take("title")
    other_names = [name.strip() for text in fields.take_all("synonym") for name in text.split("\n")]
    unique = dict.fromkeys(name for name in (*names[1:], *other_names) if name and name not in names[:1])
    identity = Identity(
        name=names[0] if names else "",
        formula="".join(fields.take("formula").split()),
        smiles=fields.take("smiles"),
        inchi=fields.take("inchi"),
        inchikey=fields.take("inchikey"),
        cas=fields.take("cas"),
        other_names=tuple(unique),
    )
    return SpectrumRecord(
        source,
        mz,
        intensity,
        accession=fields.take("accession"),
        title=title,
        identity=identity,
        acquisition=_take_acquisition(fields, energy_ev),
        retention=retention,
        derivative=fields.take("derivative"),
        licence=fields.take("licence"),
        authors=fields.take("authors"),
        splash=fields.take("splash"),
        comments=(*comments, *stated_comments),
        is_profile=is_profile or fields.take("profile").lower() in ("yes", "true", "profile"),
        extra=fields.rest() | energy_note | retention_notes,
    )


def _take_time(fields: NamedFields) -> str:
    seconds, minutes = fields.take("retention time in seconds"), fields.take("retention time in minutes")
    if seconds:
        return f"{seconds} s"
    return f"{minutes} min" if minutes else fields.take("retention time")


def _take_acquisition(fields: NamedFields, energy_ev: float | None) -> Acquisition:
    instrument_type = fields.take("instrument type")
    code, sign = read_ionization(fields.take("ionization"))
    level = fields.take("ms level")
    match = re.fullmatch(r"(?:MS)?\s*(\d?)", level, re.IGNORECASE) if level else None
    if level and match is None:
        fields.add("MS type", level)
    lowest, highest = read_mass_range(fields.take("scan range"))
    lowest = _positive(fields.take("lowest mz")) or lowest
    highest = _positive(fields.take("highest mz")) or highest
    polarity = fields.take("polarity")
    mode, mode_sign = read_ionization(polarity)
    if mode.upper() in ("EI", "CI") and not code:
        code, sign = mode, mode_sign or sign
    return Acquisition(
        instrument=fields.take("instrument"),
        instrument_type=instrument_type,
        ionization=ionization_of_instrument_type(instrument_type) or code,
        energy_ev=energy_ev,
        inlet=fields.take("inlet") or ("GC" if instrument_type.upper().startswith("GC-") else ""),
        ms_level=None if match is None else int(match.group(1) or 1),
        polarity=_polarity(polarity) or sign,
        lowest_mz=lowest,
        highest_mz=highest,
    )


def _positive(text: str) -> float | None:
    value = parse_number(text)
    return value if value is not None and value > 0 else None


def _polarity(text: str) -> str:
    lower = text.lower()
    if lower in ("p", "+") or lower.startswith("pos"):
        return "positive"
    return "negative" if lower in ("n", "-") or lower.startswith("neg") else ""


def cut_field(text: str) -> str:
    """`text`, cut where it is longer than a metadata value may be, and saying so.

    Examples
    --------
    >>> cut_field("short"), cut_field("x" * 20_000)[-9:]
    ('short', 'x … (cut)')
    """
    return text if len(text) <= MAX_FIELD_CHARS else f"{text[:MAX_FIELD_CHARS]} … (cut)"
