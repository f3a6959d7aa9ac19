"""A solution as headed lists of formulas, before any notation is chosen.

The terminal text and the LaTeX fragment both read this, so that they never
say different things.
"""

from __future__ import annotations

from dataclasses import dataclass, field

from sympy import Eq, Expr, Function, Symbol
from sympy.core.relational import Relational

from hjsolve.records import (
    Check,
    CompleteIntegral,
    Definition,
    Formula,
    Hamiltonian,
    Motion,
    Separation,
    Solution,
    Term,
)
from hjsolve.writing.solution import closed_forms, family


@dataclass(frozen=True, slots=True)
class Line:
    """A remark in words, a formula, or both; ``where`` and ``valid`` belong to the formula."""

    remark: str = ""
    formula: Expr | Relational | None = None
    where: tuple[Definition, ...] = ()
    valid: tuple[Relational, ...] = ()


@dataclass(slots=True)
class Section:
    """A heading and what stands under it."""

    heading: str
    lines: list[Line] = field(default_factory=list)


def outline(solution: Solution) -> list[Section]:
    """The sections of a solution that have something to say, in the order of the mathematics."""
    sections = [
        _problem(solution),
        _constants(solution.separation),
        _separated(solution.separation),
        _integral(solution.hamiltonian, solution.integral)
        if solution.integral
        else Section("Complete integral"),
        _motion(solution, solution.motion) if solution.motion else Section("Motion"),
        Section("Certificate", [Line(_check(check)) for check in solution.certificate.checks]),
    ]
    return [section for section in sections if section.lines]


def _equal(left: Expr, right: Expr) -> Relational:
    return Eq(left, right, evaluate=False)


def _line(left: Expr | None, right: Formula, remark: str = "") -> Line:
    formula = right.expression if left is None else _equal(left, right.expression)
    return Line(remark, formula, right.where, right.valid)


def _letter(name: str, hamiltonian: Hamiltonian) -> Symbol:
    """A letter of this outline, underscored when the problem uses it itself."""
    taken = {symbol.name for symbol in hamiltonian.expression.free_symbols}
    while name in taken:
        name += "_"
    return Symbol(name)


def _problem(solution: Solution) -> Section:
    hamiltonian = solution.hamiltonian
    lines = [Line("", _equal(_letter("H", hamiltonian), hamiltonian.expression))]
    if solution.integral is not None:
        lines.append(Line("Hamilton–Jacobi equation", solution.integral.equation))
    return Section("Problem", lines)


def _constants(separation: Separation) -> Section:
    section = Section("Constants of the motion")
    for constant in separation.constants:
        integral = constant.first_integral
        if integral is None:
            section.lines.append(
                Line(f"{constant.meaning}; no closed form as a first integral", constant.symbol)
            )
        else:
            section.lines.append(Line(constant.meaning, _equal(constant.symbol, integral)))
    return section


def _separated(separation: Separation) -> Section:
    section = Section("Separated equations")
    for equation in separation.equations:
        section.lines.append(
            Line("", _equal(equation.momentum, equation.solution), equation.where, equation.valid)
        )
    for reduced in separation.reduced:
        names = ", ".join(symbol.name for symbol in reduced.block)
        section.lines.append(Line(f"left on the block {names}", reduced.equation))
    return section


def _integral(hamiltonian: Hamiltonian, integral: CompleteIntegral) -> Section:
    section = Section("Complete integral")
    if integral.principal is not None:
        section.lines.append(
            _line(_letter("S", hamiltonian), integral.principal, "principal function")
        )
    if integral.characteristic is not None:
        section.lines.append(
            _line(_letter("W", hamiltonian), integral.characteristic, "characteristic function")
        )
    for term in integral.terms:
        coordinate = term.equation.coordinate
        left = Function(f"W_{coordinate.name}")(coordinate)
        forms = closed_forms(term)
        section.lines.extend(_line(left, form, family(term)) for form in forms)
        if not forms:
            reason = term.root.reason or term.drift.reason or "no family took it"
            section.lines.append(
                Line(
                    f"no closed form: {reason}",
                    _equal(left.diff(coordinate), term.equation.drift + term.equation.root),
                    term.equation.where,
                )
            )
        section.lines.extend(_cycles(term, _letter("J", hamiltonian)))
    return section


def _cycles(term: Term, letter: Symbol) -> list[Line]:
    """The action over a cycle and its derivatives by the constants on which it depends."""
    lines = []
    for cycle in term.cycles:
        action = Function(f"{letter.name}_{term.equation.coordinate.name}")
        arguments = [alpha for alpha, f in cycle.derivatives if f is None or f.expression != 0]
        left = action(*arguments) if arguments else Symbol(action.__name__)
        if cycle.action is not None:
            lines.append(_line(left, cycle.action, f"action, {cycle.kind}"))
        for alpha in arguments:
            formula = dict(cycle.derivatives)[alpha]
            if formula is not None:
                lines.append(_line(left.diff(alpha), formula, cycle.kind))
    return lines


def _motion(solution: Solution, motion: Motion) -> Section:
    section = Section("Motion")
    section.lines.extend(
        _line(None, relation.equation, relation.says) for relation in motion.relations
    )
    hamiltonian = solution.hamiltonian
    momentum = dict(zip(hamiltonian.coordinates, hamiltonian.momenta, strict=True))
    momenta = [(momentum.get(symbol, symbol), formula) for symbol, formula in motion.momenta]
    for symbol, formula in (*motion.coordinates, *momenta):
        if formula is not None:
            section.lines.append(_line(symbol, formula))
    for other in motion.others:
        section.lines.append(_line(other.coordinate, other.motion, "another regime"))
    for given in motion.parametrisations:
        remark = f"{given.says} ({given.parameter.name})"
        for symbol, formula in (*given.coordinates, *given.laws):
            section.lines.append(_line(symbol, formula, remark))
            remark = ""
    return section


def _check(check: Check) -> str:
    bound = "" if check.bound is None else f", bound {check.bound:.1g}"
    return f"{check.verdict}: {check.claim} ({check.method}{bound})"
