"""The explanation of a number: what it is the sum of. The other nouns stand in `identify.records`, which offers these too."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import overload


@dataclass(frozen=True, slots=True)
class Explanation:
    """A number and the parts it is the sum of."""

    label: str
    value: float
    detail: str = ""
    parts: Sequence[Explanation] = ()
    """A tuple, or `Terms`."""

    def __post_init__(self) -> None:
        parts = self.parts
        if not parts:
            return
        values = parts.values if isinstance(parts, Terms) else [part.value for part in parts]
        if abs(sum(values) - self.value) > 1e-9:
            raise ValueError(f"parts of '{self.label}' do not add up to {self.value}")


@dataclass(frozen=True, slots=True)
class Terms(Sequence[Explanation]):
    """Parts without parts of their own, kept as columns: five in six nodes of an explanation are such, 1,300 a query.

    Examples
    --------
    >>> Terms(("a", "b"), (1.0, 2.0), ("", "seen"))[1]
    Explanation(label='b', value=2.0, detail='seen', parts=())
    """

    labels: tuple[str, ...]
    values: tuple[float, ...]
    details: tuple[str, ...]

    def __len__(self) -> int:
        return len(self.labels)

    def __iter__(self) -> Iterator[Explanation]:
        return map(Explanation, self.labels, self.values, self.details)

    @overload
    def __getitem__(self, place: int) -> Explanation: ...
    @overload
    def __getitem__(self, place: slice) -> Terms: ...
    def __getitem__(self, place: int | slice) -> Explanation | Terms:
        if isinstance(place, slice):
            return Terms(self.labels[place], self.values[place], self.details[place])
        return Explanation(self.labels[place], self.values[place], self.details[place])
