"""A transformation as the JSON body of the contract's answer, and as lines for a person."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from sympy import Eq, Expr, Rational, Symbol
from sympy.core.relational import Relational

from hjsolve.records import (
    Branch,
    Certificate,
    Formula,
    GeneratingFunction,
    Map,
    Transformation,
    Truth,
    WrongBracket,
)

Write = Callable[[Formula | Expr | Relational], Any]


def transformation_document(found: Transformation, write: Write) -> dict[str, Any]:
    """The answer; ``write`` makes the object of a formula.

    ``canonical`` is null when undecided.  ``relations`` are the implicit
    relations of the generating function; ``generating_functions_missing`` has
    the combinations without one, each with the reason.
    """
    top = found.branches[0] if found.branches else Branch(None, None, None)
    canonical = {Truth.PROVED: True, Truth.REFUTED: False, Truth.UNDECIDED: None}[found.canonical]
    own = found.generating_function
    document: dict[str, Any] = {
        "canonical": canonical,
        **_branch(top, write),
        "generating_function": _function(own, write) if own and own.function else None,
        "generating_functions": [
            _function(g, write) for g in found.generating_functions if g.function is not None
        ],
        "generating_functions_missing": [
            {
                "kinds": list(g.kinds),
                "exists": {Truth.PROVED: True, Truth.REFUTED: False}.get(g.exists),
                "reason": g.reason,
            }
            for g in found.generating_functions
            if g.function is None
        ],
        "relations": [write(r) for r in found.relations],
        "branches": [_branch(b, write) for b in found.branches[1:]],
        "obstruction": _obstruction(found.obstruction, write) if found.obstruction else None,
        "certificate": _certificate(found.certificate),
    }
    if found.first_order:
        document["first_order"] = _map(found.first_order, write)
    if found.multiplier is not None:
        document["multiplier"] = write(found.multiplier)
    return document


def _branch(branch: Branch, write: Write) -> dict[str, Any]:
    return {
        "old_in_new": _map(branch.old_in_new, write),
        "new_in_old": _map(branch.new_in_old, write),
        "new_hamiltonian": write(branch.new_hamiltonian) if branch.new_hamiltonian else None,
        "added_to_hamiltonian": write(branch.added) if branch.added else None,
    }


def _map(values: Map | None, write: Write) -> dict[str, Any] | None:
    return None if values is None else {s.name: write(formula) for s, formula in values}


def _function(g: GeneratingFunction, write: Write) -> dict[str, Any]:
    written = {"kinds": list(g.kinds), "function": write(g.function) if g.function else None}
    return written | ({"remark": g.reason} if g.reason else {})


def _obstruction(wrong: WrongBracket, write: Write) -> dict[str, Any]:
    value = float(wrong.expected) + wrong.midpoint
    return {
        "bracket": list(wrong.pair),
        "expected": str(wrong.expected),
        "formula": write(wrong.value),
        "point": {name: _number(v) for name, v in wrong.point},
        "value": {"mid": value, "radius": wrong.radius + abs(value) * 2.3e-16},
        "excess": {"mid": wrong.midpoint, "radius": wrong.radius},
    }


def _number(value: Rational) -> str:
    return str(value.p) if value.q == 1 else f"{value.p}/{value.q}"


def _certificate(certificate: Certificate) -> dict[str, Any]:
    return {
        "checks": [
            {"claim": c.claim, "verdict": str(c.verdict), "method": c.method, "bound": c.bound}
            for c in certificate.checks
        ]
    }


def transformation_lines(found: Transformation, show: Callable[[Any], str]) -> list[str]:
    """The answer in words and formulas; ``show`` writes a formula on one line."""
    lines = [_verdict(found, show)]
    for number, branch in enumerate(found.branches):
        if number:
            lines += ["", f"Branch {number + 1}"]
        for title, values in (
            ("Old variables", branch.old_in_new),
            ("New variables", branch.new_in_old),
        ):
            if values is not None:
                lines += ["", title, *_shown(values, show)]
        if branch.new_hamiltonian is not None:
            lines += ["", "New Hamiltonian", f"  K = {show(branch.new_hamiltonian.expression)}"]
    if found.relations:
        lines += ["", "Relations", *(f"  {show(r)}" for r in found.relations)]
    if found.generating_functions:
        lines += ["", "Generating functions"]
        for g in found.generating_functions:
            kinds = ", ".join(map(str, g.kinds))
            said = g.reason if g.function is None else f"F = {show(g.function.expression)}"
            lines.append(f"  kind {kinds}: {said}")
    lines += ["", "Certificate"]
    for c in found.certificate.checks:
        bound = "" if c.bound is None else f", bound {c.bound:.1g}"
        lines.append(f"  {c.verdict}: {c.claim} ({c.method}{bound})")
    return lines


def _verdict(found: Transformation, show: Callable[[Any], str]) -> str:
    if found.canonical is Truth.PROVED:
        return "The transformation is canonical."
    if found.canonical is Truth.UNDECIDED:
        return "Whether the transformation is canonical was not decided."
    wrong = found.obstruction
    said = "The transformation is not canonical"
    if wrong is not None:
        first, second = wrong.pair
        said += f": [{first}, {second}] = {show(wrong.value)}, not {wrong.expected}"
    if found.multiplier is not None:
        said += f"; all brackets have the constant factor {show(found.multiplier)}"
    return said + "."


def _shown(values: Map, show: Callable[[Any], str]) -> list[str]:
    out = []
    for s, formula in values:
        needs = ", ".join(show(v) for v in formula.valid)
        out.append(f"  {show(Eq(Symbol(s.name), formula.expression, evaluate=False))}")
        if needs:
            out.append(f"    for {needs}")
    return out
