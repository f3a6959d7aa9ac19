r"""A solution as a LaTeX fragment: headings, sentences and align blocks.

It needs amsmath and a Unicode-aware engine or inputenc utf8; it sets no
preamble of its own.
"""

from __future__ import annotations

from sympy import Expr, Symbol
from sympy.core.relational import Relational

from hjsolve.records import Definition, Solution
from hjsolve.writing.outline import Line, outline
from hjsolve.writing.sentences import verdict_sentences
from hjsolve.writing.tex import latex_name, write_latex

_SPECIAL = {
    "\\": r"\textbackslash{}",
    "{": r"\{",
    "}": r"\}",
    "_": r"\_",
    "^": r"\textasciicircum{}",
    "&": r"\&",
    "%": r"\%",
    "#": r"\#",
    "$": r"\$",
    "~": r"\textasciitilde{}",
    "<": r"\textless{}",
    ">": r"\textgreater{}",
    "±": r"$\pm$",
}


def escaped(text: str) -> str:
    """Plain words made safe for LaTeX."""
    return "".join(_SPECIAL.get(letter, letter) for letter in text)


def as_latex(solution: Solution) -> str:
    """The whole solution as a fragment to be put into a document."""
    parts = [r"\paragraph{Verdict} " + " ".join(map(escaped, verdict_sentences(solution)))]
    for section in outline(solution):
        items = "\n".join(_item(line) for line in section.lines)
        parts.append(
            f"\\paragraph{{{escaped(section.heading)}}}\n\\begin{{itemize}}\n{items}\n"
            "\\end{itemize}"
        )
    return "\n\n".join(parts) + "\n"


def _item(line: Line) -> str:
    words = [r"\item", escaped(line.remark)] if line.remark else [r"\item"]
    if line.formula is not None:
        rows = [_aligned(line.formula)]
        rows.extend(rf"& \text{{where }} {_definition(d)}" for d in line.where)
        if line.valid:
            rows.append(r"& \text{for } " + ",\\ ".join(write_latex(c) for c in line.valid))
        body = " \\\\\n".join(rows)
        words.append(f"\\begin{{align*}}\n{body}\n\\end{{align*}}")
    return " ".join(words)


def _aligned(formula: Expr | Relational) -> str:
    if isinstance(formula, Relational) and formula.rel_op == "==":
        return f"{write_latex(formula.lhs)} &= {write_latex(formula.rhs)}"
    return f"& {write_latex(formula)}"


def _definition(definition: Definition) -> str:
    name = latex_name(definition.symbol.name)
    if definition.definition is not None:
        return f"{name} = {write_latex(definition.definition)}"
    if definition.root_of is not None and isinstance(definition.unknown, Symbol):
        unknown = latex_name(definition.unknown.name)
        return (
            rf"{name} \text{{ is real root number }} {definition.index} \text{{ of }} "
            rf"{write_latex(definition.root_of)} \text{{ in }} {unknown}"
        )
    return rf"{name} \text{{ {escaped(definition.free or 'is free')}}}"
