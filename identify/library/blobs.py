"""Number arrays as compact bytes: little-endian, lengths checked, never pickle."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from identify.errors import LibraryDamaged, SpectrumError
from identify.records import FloatArray

FLOAT64, FLOAT32, UINT16 = "<f8", "<f4", "<u2"


def pack(values: FloatArray, dtype: str) -> bytes:
    """Bytes of `values` in the little-endian `dtype`.

    Parameters
    ----------
    values : ndarray of shape (n,)
        Finite numbers; integers in [0, 65535] for `UINT16`, non-zero after rounding for `FLOAT32`.
    dtype : str
        One of `FLOAT64`, `FLOAT32`, `UINT16`.

    Returns
    -------
    bytes

    Raises
    ------
    SpectrumError
        If a value does not survive the conversion (overflow, underflow to zero, a fraction).

    Examples
    --------
    >>> pack(np.array([1.0, 258.0]), UINT16)
    b'\\x01\\x00\\x02\\x01'
    """
    if dtype == UINT16:
        survives = (values >= 0) & (values <= 65535) & (values == np.floor(values))
        if not survives.all():
            raise SpectrumError("nominal m/z", found=str(values[~survives][0]), expected="a whole number up to 65535")
    with np.errstate(over="ignore", under="ignore"):
        packed = np.asarray(values).astype(dtype)
    if dtype == FLOAT32 and not (np.isfinite(packed).all() and ((packed != 0) | (values == 0)).all()):
        raise SpectrumError("intensity", found="a value outside single precision", expected="1e-37 to 1e38")
    return packed.tobytes()


def unpack(data: bytes, dtype: str, where: str) -> NDArray[np.float64]:
    """Float64 array held by `data`.

    Parameters
    ----------
    data : bytes
    dtype : str
        One of `FLOAT64`, `FLOAT32`, `UINT16`.
    where : str
        Library and entry, for the message.

    Returns
    -------
    ndarray of float64, shape (n,), read-only

    Raises
    ------
    LibraryDamaged
        If the length is not a whole number of items.

    Examples
    --------
    >>> unpack(b'\\x01\\x00\\x02\\x01', UINT16, "example").tolist()
    [1.0, 258.0]
    """
    size = int(dtype[-1])
    if len(data) % size:
        raise LibraryDamaged("peaks", where=where, found=f"{len(data)} bytes", expected=f"a multiple of {size}")
    values = np.frombuffer(data, dtype=dtype).astype(np.float64)
    values.setflags(write=False)  # so that `Peaks` need not copy it again
    return values
