"""Arrays in a text: shuffled, compressed, base64, with a table of contents. Nothing is rounded but to its own type."""

from __future__ import annotations

from base64 import b64encode
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any
from zlib import compress

import numpy as np
from numpy.typing import NDArray

_LEVEL = 6


@dataclass(frozen=True)
class Packed:
    """Arrays as one text.

    Attributes
    ----------
    text : str
        Base64 of the compressed bytes (RFC 1950), safe inside an HTML element.
    contents : mapping of str to mapping
        For each array its type, shape, whether differences along the first axis stand in its place, and where its bytes
        begin once they are inflated.
    """

    text: str
    contents: Mapping[str, Mapping[str, Any]] = field(default_factory=dict)


def pack_arrays(arrays: Mapping[str, NDArray[Any]]) -> Packed:
    """Pack arrays of float32 and integers.

    Integers are replaced by differences along the first axis, and the bytes of equal weight put side by side: both
    make them compress well, and neither loses anything.

    Parameters
    ----------
    arrays : mapping of str to array
        Of one or two axes; float32, int16, int32, uint8 or uint16.

    Returns
    -------
    Packed

    Examples
    --------
    >>> packed = pack_arrays({"element": np.arange(1, 6, dtype=np.int32)})
    >>> packed.contents["element"]["shape"], packed.contents["element"]["delta"]
    ([5], True)
    """
    parts: list[bytes] = []
    contents: dict[str, dict[str, Any]] = {}
    place = 0
    for name, array in arrays.items():
        is_delta = array.dtype.kind in "iu"
        little = np.ascontiguousarray(array, dtype=array.dtype.newbyteorder("<"))
        # Differences wrap round in the array's own type, and so do the sums that undo them.
        values = np.diff(little, axis=0, prepend=np.zeros_like(little[:1])) if is_delta else little
        shuffled = values.reshape(-1, 1).view(np.uint8).reshape(-1, array.itemsize).T.tobytes()
        contents[name] = {
            "type": array.dtype.name,
            "shape": list(array.shape),
            "delta": is_delta,
            "start": place,
        }
        parts.append(shuffled)
        place += len(shuffled)
    return Packed(b64encode(compress(b"".join(parts), _LEVEL)).decode("ascii"), contents)
