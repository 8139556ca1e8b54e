"""Disjoint sets of names."""

from collections.abc import Sequence


class Joined:
    """Disjoint sets of names (union with path halving)."""

    def __init__(self) -> None:
        self.parent: dict[str, str] = {}

    def find(self, name: str) -> str:
        """The representative of a name's set."""
        parent = self.parent
        parent.setdefault(name, name)
        while parent[name] != name:
            parent[name] = parent[parent[name]]
            name = parent[name]
        return name

    def join(self, names: Sequence[str]) -> None:
        """Puts names into one set."""
        for name in names[1:]:
            one, other = self.find(names[0]), self.find(name)
            if one != other:
                self.parent[other] = one
