"""Sentences and words that many outputs share."""

from __future__ import annotations

CAUTION = (
    "An aid only: to be verified by a qualified engineer under IEC 61400-5, DNV-ST-0376 and local codes.",
    "It certifies nothing.",
)
"""What every file, picture and page carries; the first sentence stands alone where there is room for one only."""


def counted(n: int, one: str, many: str = "") -> str:
    """A count with its noun, which may bring its verb.

    Parameters
    ----------
    n : int
    one : str
        Said of one.
    many : str, optional
        Said of any other number; the first with an s where it is left out.

    Returns
    -------
    str

    Examples
    --------
    >>> counted(1, "element"), counted(0, "element"), counted(2, "foot is bare", "feet are bare")
    ('1 element', '0 elements', '2 feet are bare')
    """
    return f"{n} {one if n == 1 else many or one + 's'}"
