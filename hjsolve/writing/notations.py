"""What an entry of ``WRITERS`` is."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from sympy import Expr
from sympy.core.relational import Relational


@dataclass(frozen=True, slots=True)
class Notation:
    """A way to write a formula.

    Attributes:
        name: the key under which a formula object of the contract carries it.
        source: what defines the notation.
        examples: pairs of a formula of the request grammar (its names all
            real) and what is written for it.
        write: the function that writes.
    """

    name: str
    source: str
    examples: tuple[tuple[str, str], ...]
    write: Callable[[Expr | Relational], str]
