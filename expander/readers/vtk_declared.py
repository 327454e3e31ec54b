"""What a VTK file says it holds, as found by the guards before VTK reads it."""

from __future__ import annotations

from dataclasses import dataclass, field


def _by_place() -> dict[str, list[str]]:
    return {"point": [], "cell": []}


class Bad(Exception):
    """The file promises what it does not hold; a guard makes it an InputError naming the file."""


@dataclass
class Declared:
    """Arrays by the places they belong to, "point" and "cell".

    Attributes
    ----------
    kind : the data set, as the file spells it.
    names : names of numeric arrays, in order.
    texts : names of arrays that hold text.
    notes : what the user should know.
    """

    kind: str
    names: dict[str, list[str]] = field(default_factory=_by_place)
    texts: dict[str, list[str]] = field(default_factory=_by_place)
    notes: list[str] = field(default_factory=list)

    def declare(self, place: str, name: str, text: bool) -> None:
        """Note one more array; one name twice is refused."""
        if name in self.names[place] or name in self.texts[place]:
            raise Bad(f"two {place} arrays are called '{name}'")
        (self.texts if text else self.names)[place].append(name)
