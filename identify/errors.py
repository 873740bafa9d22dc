"""What can go wrong: one tree, and one form of message.

::

    IonwitnessError                 everything this package raises on purpose
    ├── UsageError                  a setting, option or combination that makes no sense      exit 2
    ├── InputError                  a file or text that cannot be used as it is               exit 1 or 3
    │   ├── FormatError             the file breaks the rules of its format
    │   ├── SpectrumError           a spectrum that no search could use
    │   └── FormulaError            a molecular formula that cannot be read
    ├── StructureError              a structure that cannot be read or drawn
    ├── LibraryError                the reference library cannot do what was asked            exit 4
    │   ├── LibraryMissing          there is no library at this path
    │   ├── LibraryVersionError     written by another schema version
    │   ├── LibraryBusy             another process holds it
    │   ├── LibraryDamaged          content does not agree with its own hashes
    │   └── LibraryConflict         the change contradicts what the library holds
    ├── IndexDamaged                a search index that must be rebuilt (never shown to a user)
    └── FetchError                  a download that did not give what was expected            exit 4

Every message reads ``<what> in <file:line>: found <x>, expected <y>. <hint>``. Foreign exceptions are translated where
the dependency lives; nothing else is caught, so a bug keeps its traceback (exit 70).
"""

from __future__ import annotations

MAX_QUOTED = 80


def quote(value: object, limit: int = MAX_QUOTED) -> str:
    """Text of a found value, printable on one line and bounded.

    Parameters
    ----------
    value : object
        What was found; hostile files may hold control characters or megabytes of it.
    limit : int
        Most characters between the quotation marks.

    Returns
    -------
    str
        The value between quotation marks, control characters escaped, cut with an ellipsis.

    Examples
    --------
    >>> quote("43 x\\n"), quote("it's long", 6)
    ("'43 x\\\\n'", '"it\\'s…"')
    """
    text = value if isinstance(value, str) else str(value)
    shown = repr(text[: limit + 1])
    return shown if len(shown) <= limit + 2 else f"{shown[: limit - 1]}…{shown[0]}"


class IonwitnessError(Exception):
    """Base of all errors raised on purpose.

    Parameters
    ----------
    what : str
        The thing that is wrong, as a noun phrase ("peak list", "library").
    where : str
        File, file:line or option; empty when there is none.
    found, expected : str
        What was there and what should have been.
    hint : str
        What the analyst can do next, as a sentence.
    """

    def __init__(self, what: str, *, where: str = "", found: str = "", expected: str = "", hint: str = "") -> None:
        self.what, self.where, self.found, self.expected, self.hint = what, where, found, expected, hint
        super().__init__(self.message)

    @property
    def message(self) -> str:
        """The whole sentence in the one form all errors share."""
        text = self.what + (f" in {self.where}" if self.where else "")
        facts = [f"found {self.found}"] if self.found else []
        facts += [f"expected {self.expected}"] if self.expected else []
        if facts:
            text += ": " + ", ".join(facts)
        return text + "." + (f" {self.hint}" if self.hint else "")

    def __reduce__(self) -> tuple[object, ...]:
        """Pickle by fields, so that an error crosses a process boundary whole."""
        fields = (self.what, self.where, self.found, self.expected, self.hint)
        return (_rebuild, (type(self), *fields))


def _rebuild(
    kind: type[IonwitnessError], what: str, where: str, found: str, expected: str, hint: str
) -> IonwitnessError:
    return kind(what, where=where, found=found, expected=expected, hint=hint)


class UsageError(IonwitnessError):
    """A setting, option or combination of them that makes no sense."""


class InputError(IonwitnessError):
    """A file or text that cannot be used as it is."""


class FormatError(InputError):
    """The file breaks the rules of its format."""


class SpectrumError(InputError):
    """A spectrum that no search could use."""


class FormulaError(InputError):
    """A molecular formula that cannot be read."""


class StructureError(IonwitnessError):
    """A structure (SMILES, InChI) that cannot be read or drawn."""


class LibraryError(IonwitnessError):
    """The reference library cannot do what was asked."""


class LibraryMissing(LibraryError):
    """There is no library at this path."""


class LibraryVersionError(LibraryError):
    """The library was written by another schema version."""


class LibraryBusy(LibraryError):
    """Another process holds the library."""


class LibraryDamaged(LibraryError):
    """Content of the library does not agree with its own hashes."""


class LibraryConflict(LibraryError):
    """The change contradicts what the library holds (a duplicate accession, a review by the proposer)."""


class IndexDamaged(IonwitnessError):
    """A search index that is stale, truncated or foreign; the caller rebuilds it."""


class FetchError(IonwitnessError):
    """A download that did not give what the recipe expects."""
