"""The free letters of families of systems."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

from sympy import Symbol


@dataclass
class Letters:
    """Makes free letters that clash with nothing."""

    names: set[str] = field(default_factory=set)

    def with_names(self, letters: Sequence[Symbol]) -> Letters:
        """One more source, for which these letters are taken too."""
        return Letters(self.names | {s.name for s in letters})

    def __call__(self, name: str, positive: bool = False) -> Symbol:
        """A letter of this name, with underscores where it is taken."""
        while name in self.names:
            name += "_"
        return Symbol(name, positive=True) if positive else Symbol(name, real=True)
