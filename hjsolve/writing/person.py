"""A solution as text for a terminal, 100 columns wide."""

from __future__ import annotations

import textwrap

from sympy import Expr
from sympy.core.relational import Relational

from hjsolve.records import Definition, Solution
from hjsolve.writing.infix import write_infix
from hjsolve.writing.outline import Line, outline
from hjsolve.writing.sentences import verdict_sentences
from hjsolve.writing.unicode import unicode_line

WIDTH = 100
_INDENT = "  "


def for_person(solution: Solution) -> str:
    """The verdict in a plain sentence, then every formula that was found.

    A formula is set in Unicode when that takes one line, else written infix,
    which can be posted back.
    """
    paragraphs = ["\n".join(_wrapped(said, "") for said in verdict_sentences(solution))]
    for section in outline(solution):
        lines = [section.heading]
        for line in section.lines:
            lines.extend(_written(line))
        paragraphs.append("\n".join(lines))
    return "\n\n".join(paragraphs) + "\n"


def _written(line: Line) -> list[str]:
    written = []
    if line.formula is not None:
        shown = one_line(line.formula)
        remark = f"   ({line.remark})" if line.remark else ""
        if len(_INDENT) + len(shown) + len(remark) > WIDTH and remark:
            written.append(_wrapped(f"{line.remark}:", _INDENT))
            remark = ""
        written.append(_wrapped(shown + remark, _INDENT))
    elif line.remark:
        written.append(_wrapped(line.remark, _INDENT))
    written.extend(_wrapped(f"where {_definition(d)}", _INDENT * 2) for d in line.where)
    if line.valid:
        conditions = ", ".join(one_line(condition) for condition in line.valid)
        written.append(_wrapped(f"for {conditions}", _INDENT * 2))
    return written


def one_line(formula: Expr | Relational) -> str:
    """The formula on one line, in Unicode."""
    return unicode_line(write_infix(formula))


def _definition(definition: Definition) -> str:
    name = definition.symbol.name
    if definition.definition is not None:
        return f"{name} = {write_infix(definition.definition)}"
    if definition.root_of is not None and definition.unknown is not None:
        return (
            f"{name} is real root number {definition.index}, in ascending order, of "
            f"{write_infix(definition.root_of)} in {definition.unknown.name}"
        )
    return f"{name} {definition.free or 'is free'}"


def _wrapped(text: str, indent: str) -> str:
    return textwrap.fill(
        text,
        WIDTH,
        initial_indent=indent,
        subsequent_indent=indent + _INDENT,
        break_long_words=False,
        break_on_hyphens=False,
    )
