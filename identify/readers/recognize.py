"""What is this file? Decided by its first bytes, never by its name."""

from __future__ import annotations

import re

from identify.errors import FormatError, quote
from identify.readers.text_lines import find_byte_order_mark, is_binary

_BINARY_KINDS = (
    (b"CDF\x01", "a netCDF file"),
    (b"CDF\x02", "a netCDF file"),
    (b"\x89HDF", "an HDF5 file"),
    (b"%PDF", "a PDF document"),
    (b"\x89PNG", "an image"),
    (b"\xff\xd8\xff", "an image"),
    (b"SQLite format 3\x00", "an SQLite file, perhaps a library"),
    (b"PK\x03\x04", "an archive inside an archive"),
    (b"\x1f\x8b", "an archive inside an archive"),
    (b"\xd0\xcf\x11\xe0", "an office document"),
    (b"7z\xbc\xaf", "an archive of a kind that is not read"),
    (b"\xfd7zXZ", "an archive of a kind that is not read"),
    (b"BZh", "an archive of a kind that is not read"),
    (b"Rar!", "an archive of a kind that is not read"),
)
UNKNOWN_FORMAT = "unknown format"
_MSP_COUNT = re.compile(r"(?:^|[\r\n])[ \t]*num(?:ber[ _]of)?[ _]*peaks?[ \t]*:", re.IGNORECASE)
FORMATS = "MassBank record, JCAMP-DX, name/value text (.msp), mzSpecLib text, mzML, MGF or a table of m/z and intensity"


_HINTS = {
    "a netCDF file": "Read a run with `ionwitness run`.",
    "an archive of a kind that is not read": "Unpack it, or pack it as zip or tar.gz.",
}


def unknown_format(where: str, found: str, hint: str = "") -> FormatError:
    """The error for a file or text that no reader takes, the same from everywhere."""
    return FormatError(UNKNOWN_FORMAT, where=where, found=found, expected=FORMATS, hint=hint)


def recognize_format(head: bytes, path: str) -> str:
    """Name of the format that the first bytes of a file belong to.

    Parameters
    ----------
    head : bytes
        First bytes of the file (up to `HEAD_BYTES`).
    path : str
        File, for messages.

    Returns
    -------
    str
        ``massbank``, ``jcamp``, ``msp``, ``mzspeclib``, ``mzml``, ``mgf`` or ``table``. ``table`` only means "text that
        may be one": its reader decides.

    Raises
    ------
    FormatError
        For an empty file, a binary file, and text of another known kind (JSON, HTML, other XML).

    Examples
    --------
    >>> recognize_format(b"##TITLE= x", "a.txt"), recognize_format(b"43 100", "a.txt")
    ('jcamp', 'table')
    """
    for magic, kind in _BINARY_KINDS:
        if head.startswith(magic):
            raise unknown_format(path, kind, _HINTS.get(kind, ""))
    if is_binary(head):
        raise unknown_format(path, "binary data", "If it is text, save it as UTF-8.")
    encoding, mark_length = find_byte_order_mark(head)
    text = head[mark_length:].decode(encoding or "utf-8", "replace")
    start = text.lstrip()
    if not start:
        raise unknown_format(path, "no text", "The file is empty.")
    return _recognize_text(start, path)


def _recognize_text(text: str, path: str) -> str:
    first = text.partition("\n")[0].partition("\r")[0].strip()
    if first.startswith("ACCESSION:"):
        return "massbank"
    if first == "<mzSpecLib>":
        return "mzspeclib"
    if text.startswith("<"):
        if re.search(r"<(?:indexedmzML|mzML)\b", text):
            return "mzml"
        raise unknown_format(path, quote(first), "This is markup of another kind.")
    if first.startswith(("{", "[")):
        raise unknown_format(path, quote(first), "JSON is not read.")
    lines = [line.strip() for line in re.split(r"\r\n|\r|\n", text)]
    content = [line for line in lines if line and not line.startswith("$$")]
    if content and content[0].startswith("##") and "=" in content[0]:
        return "jcamp"
    if "BEGIN IONS" in lines:
        return "mgf"
    return "msp" if _MSP_COUNT.search(text) else "table"
