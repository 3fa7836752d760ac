"""One quantity before and after, and a named thing with its quantities."""

from __future__ import annotations

from dataclasses import dataclass

GONE, NEW, CHANGED = "gone", "new", "changed"


@dataclass(frozen=True)
class Value:
    """A quantity in both meshes.

    Attributes
    ----------
    name : str
    unit : str
        Empty for counts and words.
    old, new : float, int, str or None
        None where a mesh has none.

    Examples
    --------
    >>> value = Value("mass", "kg", 200.0, 203.0)
    >>> value.difference, value.share, value.is_equal
    (3.0, 0.015, False)
    """

    name: str
    unit: str
    old: float | int | str | None
    new: float | int | str | None

    @property
    def is_equal(self) -> bool:
        """Whether nothing changed."""
        return self.old == self.new

    @property
    def difference(self) -> float | None:
        """New less old; None for words and where one is missing."""
        if isinstance(self.old, str) or isinstance(self.new, str) or self.old is None or self.new is None:
            return None
        return self.new - self.old

    @property
    def share(self) -> float | None:
        """Difference over the old value; None where that is nought."""
        if self.difference is None or isinstance(self.old, str) or not self.old:
            return None
        return self.difference / self.old


@dataclass(frozen=True)
class Entry:
    """Something with a name that came, went or changed: a region, a ply, a stack, a material, a station.

    Attributes
    ----------
    name : str
    state : str
        GONE, NEW or CHANGED.
    values : tuple of Value
        What is known of it, equal values too.
    """

    name: str
    state: str
    values: tuple[Value, ...]

    def value(self, name: str) -> Value:
        """One of its quantities.

        Raises
        ------
        KeyError
            There is none of that name.
        """
        found = {value.name: value for value in self.values}
        return found[name]
