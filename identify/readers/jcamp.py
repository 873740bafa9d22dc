"""JCAMP-DX for mass spectra → spectrum records.

Reads single blocks, concatenated blocks, blocks inside a LINK block, and NTUPLES series; the dialects with data behind
``##NPOINTS`` as well. Labels are compared without case, blanks, ``-``, ``/`` and ``_``; ``$$`` starts a comment. Format:
Lampen et al. 1994, Appl. Spectrosc. 48:1545, as excerpted in the project's reference notes (standards 5.1).
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator
from dataclasses import dataclass, field, replace

from identify.errors import InputError, quote
from identify.readers.fault_reports import OnReject, counted, fault, rejection_of
from identify.readers.jcamp_data import Axis, DataSection, Points, parse_data
from identify.readers.limits import LINE_OVERHEAD_BYTES, MAX_RECORD_BYTES
from identify.readers.named_fields import NamedFields, cut_field, record_from_fields
from identify.readers.numbers import find_number, parse_number
from identify.records import Source, SpectrumRecord

_DATA_LABELS = ("PEAKTABLE", "XYPOINTS", "XYDATA")
_DATA_FORM = re.compile(r"\s*(\([^()]*(?:\([^()]*\))?\))[\s,]*(?:PEAKS|XYDATA|XYPOINTS|PROFILE)?(.*)", re.IGNORECASE)
_SHAPE_LABELS = frozenset(
    {"TITLE", "JCAMPDX", "JCAMPCS", "DATATYPE", "DATACLASS", "BLOCKS", "BLOCKID", "END", "NPOINTS", *_DATA_LABELS}
    | {"XUNITS", "YUNITS", "XFACTOR", "YFACTOR", "FIRSTX", "LASTX", "FIRSTY", "DELTAX", "MAXX", "MINX", "MAXY", "MINY"}
    | {"NTUPLES", "PAGE", "DATATABLE", "ENDNTUPLES", "VARNAME", "SYMBOL", "VARTYPE", "VARFORM", "VARDIM", "UNITS"}
    | {"FIRST", "LAST", "MIN", "MAX", "FACTOR"}
)
"""Labels that say how the block is built: read where they matter, not kept."""
_MAX_NESTED = 16
"""LINK blocks inside each other: one is usual."""
_MAX_LOOSE_COMMENTS = 1000
"""Comments kept of those before the first block."""
_NO_LABEL = "?"
_NOT_STATED = "not stated"
_FREE_LICENCE = re.compile(r"public domain|\bCC0\b|\bCC[ -]BY", re.IGNORECASE)


@dataclass
class _Label:
    """One labelled data record: label for comparison, label as written, value lines, line number."""

    label: str
    name: str
    lines: list[str]
    line: int
    n_bytes: int = 0

    def add(self, text: str) -> None:
        """Take one more line; what passes the bound is passed over, and `n_bytes` says so."""
        self.n_bytes += len(text) + LINE_OVERHEAD_BYTES
        if self.n_bytes <= MAX_RECORD_BYTES:
            self.lines.append(text)

    @property
    def value(self) -> str:
        return "\n".join(self.lines).strip()


@dataclass
class _Block:
    """One block from ##TITLE to ##END while it comes in."""

    line: int
    labels: dict[str, _Label] = field(default_factory=dict)
    pairs: list[tuple[str, str]] = field(default_factory=list)
    comments: list[str] = field(default_factory=list)
    n_bytes: int = 0
    error: InputError | None = None
    page: dict[str, _Label] = field(default_factory=dict)
    n_pages: int = 0
    n_inner: int = 0

    def add_comment(self, text: str) -> None:
        self.n_bytes += len(text) + LINE_OVERHEAD_BYTES
        if self.n_bytes <= MAX_RECORD_BYTES:
            self.comments.append(text)

    def refuse_if_faulty(self, path: str) -> None:
        if self.error is not None:
            raise self.error
        if self.n_bytes > MAX_RECORD_BYTES:
            found = f"more than {MAX_RECORD_BYTES} bytes"
            raise fault("block", path, self.line, found=found, expected="one spectrum with its metadata")

    def text(self, label: str) -> str:
        return self.labels[label].value if label in self.labels else ""

    @property
    def is_link(self) -> bool:
        return self.text("DATATYPE").upper() == "LINK"

    @property
    def is_series(self) -> bool:
        return "NTUPLES" in self.labels


def parse_jcamp(lines: Iterable[str], path: str, on_reject: OnReject) -> Iterator[SpectrumRecord]:
    """Spectrum records of a JCAMP-DX text.

    Parameters
    ----------
    lines : iterable of str
        Lines without their ends.
    path : str
        File, for provenance and messages.
    on_reject : callable
        Takes the `Rejection` of each block (or page of a series) with a fault: another data type, a number that is none,
        a point count that differs, a missing end.

    Yields
    ------
    SpectrumRecord
        `source.line` is the line of ``##TITLE`` (of ``##PAGE`` in a series). The title serves as the name where none is given.
        Profile data (equal steps below 0.5) are marked.

    Notes
    -----
    ``##OWNER`` becomes the licence only where it names one (public domain, CC …); ``##ORIGIN`` stands in for missing authors.

    Examples
    --------
    >>> text = "##TITLE= acetone\\n##DATA TYPE= MASS SPECTRUM\\n##PEAK TABLE= (XY..XY)\\n43,100 58,23\\n##END="
    >>> [record] = parse_jcamp(text.splitlines(), "a.jdx", print)
    >>> record.identity.name, record.mz.tolist(), record.intensity.tolist()
    ('acetone', [43.0, 58.0], [100.0, 23.0])
    """
    reader = _Reader(path, on_reject)
    for label in _split_labels(lines, path, on_reject):
        yield from reader.take(label)
    reader.close()


def _split_labels(lines: Iterable[str], path: str, on_reject: OnReject) -> Iterator[_Label]:
    current: _Label | None = None
    comments: list[_Label] = []
    n_said = 0
    for line_number, line in enumerate(lines, 1):
        text, mark, comment = line.partition("$$")
        stripped = text.strip()
        if stripped.startswith("##"):
            if current is not None:
                yield current
            yield from comments
            comments, n_said = [], 0
            name, equals, value = stripped[2:].partition("=")
            label = re.sub(r"[\s\-/_]", "", name).upper() if equals else _NO_LABEL
            current = _Label(label, name.strip(), [], line_number)
            current.add(value.strip())
        elif current is not None and (stripped or not mark):
            current.add(stripped)
        elif stripped and current is None:
            error = fault("text before a label", path, line_number, found=quote(stripped), expected="'##TITLE='")
            on_reject(rejection_of(error, path))
            current = _Label("", "", [], line_number)
        elif current is not None:
            # A comment line keeps its place, so that line numbers of data rows stay right.
            current.add("")
        n_said += len(comment) + LINE_OVERHEAD_BYTES
        if comment.strip() and n_said <= MAX_RECORD_BYTES:
            comments.append(_Label("$$", "", [cut_field(comment.strip())], line_number))
    if current is not None:
        yield current
    yield from comments


class _Reader:
    """Puts labels together to blocks and pages, and these to records."""

    def __init__(self, path: str, on_reject: OnReject) -> None:
        self._path, self._on_reject = path, on_reject
        self._open: list[_Block] = []
        self._number = 0
        self._comments: list[str] = []

    def take(self, label: _Label) -> Iterator[SpectrumRecord]:
        """Records that `label` completes."""
        if label.label == "$$":
            if self._open:
                self._open[-1].add_comment(label.lines[0])
            elif len(self._comments) < _MAX_LOOSE_COMMENTS:
                self._comments.append(label.lines[0])
        elif label.label == "TITLE":
            if self._open and not self._open[-1].is_link:
                self._reject_open(label)
            if len(self._open) == _MAX_NESTED:
                found, expected = f"more than {_MAX_NESTED} blocks inside each other", "one LINK block around spectra"
                raise fault("block", self._path, label.line, found=found, expected=expected)
            block = _Block(label.line, {"TITLE": label}, comments=self._comments)
            self._comments = []
            self._open.append(block)
        elif not self._open:
            if label.label not in ("", "END"):
                error = fault(
                    "label outside a block", self._path, label.line, found=quote(label.name), expected="'##TITLE='"
                )
                self._on_reject(rejection_of(error, self._path))
        elif label.label == "END":
            yield from self._finish(self._open.pop())
        elif self._open[-1].is_series and label.label in ("PAGE", "NPOINTS", "DATATABLE", "ENDNTUPLES"):
            yield from self._take_page(self._open[-1], label)
        else:
            _add_label(self._open[-1], label, self._path)

    def close(self) -> None:
        """Report blocks that have no end."""
        for block in self._open:
            hint = "The file may be truncated."
            error = fault("block without end", self._path, block.line, found="none", expected="'##END='", hint=hint)
            self._on_reject(rejection_of(error, self._path))

    def _reject_open(self, label: _Label) -> None:
        block = self._open.pop()
        found = f"'##TITLE=' in line {label.line}"
        error = fault("block without end", self._path, block.line, found=found, expected="'##END='")
        self._on_reject(rejection_of(error, self._path))

    def _finish(self, block: _Block) -> Iterator[SpectrumRecord]:
        if self._open:
            self._open[-1].n_inner += 1
        try:
            block.refuse_if_faulty(self._path)
            if block.is_link:
                self._check_link(block)
                return
            _check_kind(block, self._path)
            if block.is_series:
                yield from self._take_page(block, None)
                if not block.n_pages:
                    raise fault("no peaks", self._path, block.line, found="no page with data", expected="at least one")
                return
            yield self._build(block, block.labels, block.line)
        except InputError as error:
            self._on_reject(rejection_of(error, self._path, block.line))

    def _check_link(self, block: _Block) -> None:
        stated = find_number(block.text("BLOCKS"))
        # Some programs count the outer block, some do not.
        if stated is not None and block.n_inner not in (stated, stated - 1):
            found = f"{counted(block.n_inner, 'block')} inside"
            raise fault("block count", self._path, block.line, found=found, expected=f"{stated:g} as BLOCKS says")

    def _take_page(self, block: _Block, label: _Label | None) -> Iterator[SpectrumRecord]:
        if label is not None and label.label in ("NPOINTS", "DATATABLE"):
            block.page[label.label] = label
            return
        page, block.page = block.page, {}
        if label is not None and label.label == "PAGE":
            block.page = {"PAGE": label}
        if "DATATABLE" not in page:
            return
        block.n_pages += 1
        line = page["PAGE"].line if "PAGE" in page else block.line
        try:
            block.refuse_if_faulty(self._path)
            _check_kind(block, self._path)
            yield self._build(block, page, line)
        except InputError as error:
            self._on_reject(rejection_of(error, self._path, line))

    def _build(self, block: _Block, labels: dict[str, _Label], line: int) -> SpectrumRecord:
        points = _parse_points(block, labels, self._path)
        fields = NamedFields([("title", block.text("TITLE")), *block.pairs])
        if not fields.has("name"):
            fields.add("name", block.text("TITLE"))
        if "PAGE" in labels:
            _add_page_variables(fields, block, labels["PAGE"])
        origin, owner = block.text("ORIGIN"), block.text("OWNER")
        if not fields.has("authors") and origin != _NOT_STATED:
            fields.add("authors", origin)
        if not fields.has("licence") and _FREE_LICENCE.search(owner[:500]):
            fields.add("licence", owner)
        self._number += 1
        source = Source(self._path, line, self._number)
        record = record_from_fields(
            fields, source, points.x, points.y, comments=block.comments, is_profile=points.is_profile
        )
        said = {record.authors, record.licence, _NOT_STATED}
        doubled = {name for name in ("ORIGIN", "OWNER") if record.extra.get(name) in said}
        return replace(record, extra={name: text for name, text in record.extra.items() if name not in doubled})


def _add_label(block: _Block, label: _Label, path: str) -> None:
    if label.label in block.labels and label.label in (*_DATA_LABELS, "NPOINTS", "DATATYPE"):
        block.error = block.error or fault(
            "label given twice", path, label.line, found=quote(f"##{label.name}="), expected="one in a block"
        )
    if label.label == _NO_LABEL:
        found = quote(f"##{label.name}")
        block.error = block.error or fault("label", path, label.line, found=found, expected="'##LABEL= value'")
    if not label.label:
        block.add_comment(cut_field(label.value))
        return
    block.n_bytes += label.n_bytes
    if block.n_bytes > MAX_RECORD_BYTES:
        return
    block.labels[label.label] = label
    if label.label not in _SHAPE_LABELS:
        block.pairs.append((label.name.lstrip(".$"), label.value))


def _check_kind(block: _Block, path: str) -> None:
    data_type = " ".join(block.text("DATATYPE").upper().split())
    units = block.text("XUNITS").upper().replace(" ", "")
    kind = block.text("NTUPLES").upper()
    is_mass = "MASS" in data_type or not data_type
    if (
        not is_mass
        or units not in ("", "M/Z", "MZ", "M/E", "AMU", "DA", "U", "ARBITRARYUNITS")
        or "MASS" not in (kind or "MASS")
    ):
        label = next(name for name in ("NTUPLES", "DATATYPE", "XUNITS") if name in block.labels)
        found = quote(block.text("XUNITS") if is_mass and units else data_type or kind)
        raise fault(
            "not a mass spectrum", path, block.labels[label].line, found=found, expected="MASS SPECTRUM over M/Z"
        )


def _parse_points(block: _Block, labels: dict[str, _Label], path: str) -> Points:
    n_points = _whole_number(labels.get("NPOINTS"), path)
    if "DATATABLE" in labels:
        axis = Axis(*_series_factors(block), n_points=n_points)
        return parse_data(_section(labels["DATATABLE"]), axis, path)
    axis = Axis(
        x_factor=_number(block, "XFACTOR", path) or 1.0,
        y_factor=_number(block, "YFACTOR", path) or 1.0,
        first_x=_number(block, "FIRSTX", path),
        last_x=_number(block, "LASTX", path),
        step=_number(block, "DELTAX", path),
        n_points=n_points,
    )
    for name in _DATA_LABELS:
        if name in labels:
            return parse_data(_section(labels[name]), axis, path)
    counted = labels.get("NPOINTS")
    if counted is not None and any(line.strip() for line in counted.lines[1:]):
        return parse_data(DataSection("(XY..XY)", counted.lines[1:], counted.line + 1), axis, path)
    expected = "##PEAK TABLE=, ##XYPOINTS=, ##XYDATA= or ##NTUPLES="
    raise fault("no peaks", path, block.line, found="no data label", expected=expected)


def _section(label: _Label) -> DataSection:
    match = _DATA_FORM.fullmatch(label.lines[0])
    if match is None:
        return DataSection(label.lines[0], label.lines[1:], label.line)
    return DataSection(match.group(1), [match.group(2), *label.lines[1:]], label.line)


def _whole_number(label: _Label | None, path: str) -> int | None:
    if label is None or not label.lines[0]:
        return None
    text = label.lines[0]
    if not (text.isascii() and text.isdigit() and len(text) < 10):
        raise fault("peak count", path, label.line, found=quote(text), expected="a whole number")
    return int(text)


def _number(block: _Block, name: str, path: str) -> float | None:
    text = block.text(name)
    if not text:
        return None
    value = parse_number(text)
    if value is None:
        label = block.labels[name]
        raise fault(f"##{label.name}", path, label.line, found=quote(text), expected="a finite number")
    return value


def _series_factors(block: _Block) -> tuple[float, float]:
    symbols = [symbol.strip().upper() for symbol in block.text("SYMBOL").split(",")]
    factors = [parse_number(text) for text in block.text("FACTOR").split(",")]
    by_symbol = dict(zip(symbols, factors, strict=False))
    return by_symbol.get("X") or 1.0, by_symbol.get("Y") or 1.0


def _add_page_variables(fields: NamedFields, block: _Block, page: _Label) -> None:
    symbols, names, units = (
        [part.strip() for part in block.text(label).split(",")] for label in ("SYMBOL", "VARNAME", "UNITS")
    )
    for statement in re.split(r"[,\n]", page.value):
        symbol, equals, value = statement.partition("=")
        if not equals or symbol.strip() not in symbols:
            continue
        position = symbols.index(symbol.strip())
        name = names[position] if position < len(names) else symbol.strip()
        unit = units[position] if position < len(units) else ""
        fields.add(name, f"{value.strip()} {unit}".strip())
