"""Arrays that a frozen dataclass can hold: checked, copied, read-only."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import DTypeLike, NDArray


def freeze_array(owner: object, field: str, *, shape: tuple[int | None, ...], dtype: DTypeLike = float) -> None:
    """Replace an array field of a frozen dataclass by a read-only copy of the wanted type and shape.

    Parameters
    ----------
    owner : object
        The dataclass instance, from its ``__post_init__``.
    field : str
        Name of the field.
    shape : tuple of int or None
        Wanted length of each axis, None where any length will do.
    dtype : dtype-like
        Wanted type.

    Raises
    ------
    ValueError
        The array has another number of axes or another length.
    """
    array: NDArray[Any] = np.array(getattr(owner, field), dtype=dtype, copy=True)
    if array.ndim != len(shape) or any(
        want is not None and want != have for want, have in zip(shape, array.shape, strict=True)
    ):
        raise ValueError(f"{type(owner).__name__}.{field}: shape {array.shape}, wanted {shape}")
    array.setflags(write=False)
    object.__setattr__(owner, field, array)
