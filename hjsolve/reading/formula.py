"""One formula: text -> SymPy expression."""

from __future__ import annotations

from collections.abc import Collection, Mapping

from sympy import Expr

from hjsolve.errors import InputError
from hjsolve.reading.build import Builder
from hjsolve.reading.grammar import parse
from hjsolve.reading.limits import LIMITS
from hjsolve.reading.tokens import tokens


def read_formula(
    text: object, names: Mapping[str, Expr], functions: Collection[str], *, pointer: str
) -> Expr:
    """Read a formula of the request grammar.

    Args:
        text: the formula as posted.
        names: what each declared name stands for: a symbol, or a rational.
        functions: the names declared as arbitrary functions.
        pointer: RFC 6901 pointer of the field the text came from.

    Returns:
        The expression after SymPy's automatic evaluation; numbers are exact.

    Raises:
        InputError: with the place in ``text``; nothing is guessed.
    """
    if not isinstance(text, str):
        raise InputError(
            f"a formula is a string, not {type(text).__name__}",
            pointer=pointer,
            expected="a string",
            code="wrong-type",
        )
    words = tokens(text, pointer)
    used: set[str] = set()
    for word in words:
        used.add(word.text) if word.kind == "name" else None
        if len(used) > LIMITS.names:
            raise InputError(
                f"more than {LIMITS.names} different names",
                pointer=pointer,
                position=word.position,
                code="too-many-names",
            )
    tree = parse(words, pointer)
    try:
        return Builder(names, functions, pointer).build(tree).expression
    except RecursionError:
        raise InputError(
            "the formula is nested too deeply to be evaluated",
            pointer=pointer,
            position=tree.position,
            code="too-deep",
        ) from None
