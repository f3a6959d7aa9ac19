"""A formula of an answer, as the object the contract describes."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from sympy import Expr
from sympy.core.relational import Relational

from hjsolve.records import Definition, Formula
from hjsolve.writing.infix import write_infix
from hjsolve.writing.registry import writer

DEFAULT = ("infix", "latex")
"""The notations of an answer that asks for none."""


def formula_object(
    formula: Formula | Expr | Relational, notations: Sequence[str] = DEFAULT
) -> dict[str, Any]:
    """The formula in each notation, with ``where`` and ``valid`` when there are any.

    Raises:
        KeyError: a notation that no entry of ``WRITERS`` has.
    """
    if not isinstance(formula, Formula):
        formula = Formula(formula)
    written: dict[str, Any] = {name: writer(name).write(formula.expression) for name in notations}
    if formula.where:
        written["where"] = [definition_object(definition) for definition in formula.where]
    if formula.valid:
        written["valid"] = [write_infix(condition) for condition in formula.valid]
    return written


def definition_object(definition: Definition) -> dict[str, Any]:
    """One entry of ``where``."""
    entry: dict[str, Any] = {"name": definition.symbol.name}
    if definition.definition is not None:
        entry["definition"] = write_infix(definition.definition)
    if definition.root_of is not None:
        entry["root_of"] = write_infix(definition.root_of)
        entry["in"] = definition.unknown.name if definition.unknown is not None else None
        entry["index"] = definition.index
    if definition.zero_of is not None:
        entry["zero_of"] = write_infix(definition.zero_of)
    if definition.free is not None:
        entry["free"] = definition.free
    return entry
