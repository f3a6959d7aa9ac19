"""For which values of the parameters does more separate?  An exact list of cases.

The conditions d(K dV) = 0 form a matrix with entries in the parameters.  Its
kernel grows exactly where a chain of pivots vanishes, so the elimination is
branched on every pivot: it is not zero, or one of its factors is.  A factor
that is linear in a parameter is solved for it; any other branch is reported.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace

from sympy import Expr, Poly, S, Symbol, div, expand, factor_list, fraction, together

from hjsolve.charts.exact import tidy
from hjsolve.charts.search.tensors import Conditions, TooHard, concircular
from hjsolve.charts.space import NotNatural, space
from hjsolve.records import Charts, Hamiltonian

BRANCHES = 400
"""More branches than this are not followed."""

Row = tuple[Expr, ...]
Equations = tuple[tuple[Symbol, Expr], ...]
Search = Callable[[Hamiltonian], Charts]


@dataclass(frozen=True, slots=True)
class Case:
    """Parameter values (in this order of substitution), and what separates there."""

    equations: tuple[tuple[Symbol, Expr], ...]
    charts: Charts


@dataclass(frozen=True, slots=True)
class Cases:
    """The cases; ``complete`` when every branch was followed, else ``reason`` says why."""

    cases: tuple[Case, ...]
    complete: bool
    reason: str = ""


@dataclass
class _Splitting:
    """The branches of one elimination."""

    letters: tuple[Symbol, ...]
    columns: int
    generic: int
    found: dict[frozenset[tuple[Symbol, Expr]], int] = field(default_factory=dict)
    left: list[str] = field(default_factory=list)
    count: int = 0

    def follow(self, rows: list[Row], fixed: Equations, rank: int, nonzero: Row) -> None:
        """Eliminate.

        ``rank`` pivots are behind, ``fixed`` are the equations on this branch and
        ``nonzero`` the factors of its pivots, which do not vanish on it.
        """
        self.count += 1
        if self.count > BRANCHES:
            self.left.append("more branches than are followed")
            return
        rows = [row for row in dict.fromkeys(_primitive(r, nonzero) for r in rows) if any(row)]
        if not rows:
            if self.columns - rank > self.generic:
                self.found[frozenset(fixed)] = self.columns - rank
            return
        choices = [
            (not e.is_number, e.count_ops(), c, k)
            for k, row in enumerate(rows)
            for c, e in enumerate(row)
            if e != 0
        ]
        _, _, column, at = min(choices)
        pivot = rows[at][column]
        factors = [] if pivot.is_number else [f for f, _ in factor_list(pivot)[1]]
        new = [f for f in factors if f not in nonzero and -f not in nonzero]
        for equation in new:
            self._branch(rows, fixed, rank, nonzero, equation)
        if rank + 1 > self.columns - self.generic - 1:
            return  # this many independent conditions leave no more than generically
        rest = [
            tuple(expand(pivot * a - row[column] * b) for a, b in zip(row, rows[at], strict=True))
            for k, row in enumerate(rows)
            if k != at
        ]
        self.follow(rest, fixed, rank + 1, (*nonzero, *new))

    def _branch(
        self, rows: list[Row], fixed: Equations, rank: int, nonzero: Row, equation: Expr
    ) -> None:
        """Go on where a factor is zero."""
        for s in sorted(equation.free_symbols, key=lambda s: s.name, reverse=True):
            p = Poly(equation, s)
            if p.degree() == 1 and p.coeff_monomial(s).is_number:
                put = {s: tidy(-p.coeff_monomial(1) / p.coeff_monomial(s))}
                kept = (*((q, tidy(e.xreplace(put))) for q, e in fixed), (s, put[s]))
                still = tuple(expand(f.xreplace(put)) for f in nonzero)
                if any(_impossible(q, e) for q, e in kept) or not all(still):
                    return
                changed = [tuple(expand(e.xreplace(put)) for e in row) for row in rows]
                self.follow(changed, kept, rank, _factors(still))
                return
        if not equation.is_positive and not equation.is_negative:
            self.left.append(f"the branch {equation} = 0")


def _factors(polynomials: Row) -> Row:
    """The irreducible factors of several polynomials."""
    return tuple(f for e in polynomials if not e.is_number for f, _ in factor_list(e)[1])


def special(hamiltonian: Hamiltonian, search: Search) -> Cases:
    """The special values of the parameters for which more separates than generically.

    ``search`` finds the charts of each case.

    Raises:
        nothing: a Hamiltonian that is not handled gives no cases and a reason.
    """
    try:
        where = space(hamiltonian)
        fields = concircular(where.coordinates, where.gram)
        conditions = Conditions(where.coordinates, fields, where.potential)
        generic = len(conditions.solve())
    except (NotNatural, TooHard) as error:
        return Cases((), False, str(error))
    letters = tuple(p.symbol for p in hamiltonian.parameters)
    rows = [tuple(_expression(conditions, e) for e in row) for row in conditions.rows]
    if any(e.free_symbols - set(letters) for row in rows for e in row):
        return Cases((), False, "the conditions hold roots of the parameters")
    if any(g.free_symbols & set(letters) for g in _moving(conditions)):
        return Cases((), False, "a parameter stands inside a function of the coordinates")
    split = _Splitting(letters, len(fields), generic)
    split.follow(rows, (), 0, ())
    if where.dimension > 2:
        split.left.append("special values for the planes and spheres inside were not looked for")
    cases = []
    for fixed in _least(split.found):
        special_h = specialised(hamiltonian, fixed)
        charts = search(special_h)
        if charts.found:
            cases.append(Case(fixed, charts))
        if not charts.complete:
            split.left.append(charts.reason)
    return Cases(tuple(cases), not split.left, "; ".join(dict.fromkeys(split.left)))


def specialised(hamiltonian: Hamiltonian, equations: Sequence[tuple[Symbol, Expr]]) -> Hamiltonian:
    """The Hamiltonian with parameters put to values."""
    put = dict(equations)
    return replace(
        hamiltonian,
        expression=hamiltonian.expression.xreplace(put),
        parameters=tuple(p for p in hamiltonian.parameters if p.symbol not in put),
    )


def _least(found: dict[frozenset[tuple[Symbol, Expr]], int]) -> list[Equations]:
    """Cases that are not part of a larger one with as many tensors."""
    kept = [
        tuple(sorted(fixed, key=lambda pair: pair[0].name))
        for fixed, dimension in found.items()
        if not any(
            other != fixed and more >= dimension and _implies(fixed, other)
            for other, more in found.items()
        )
    ]
    return sorted(kept, key=lambda fixed: (len(fixed), str(fixed)))


def _implies(fixed: frozenset[tuple[Symbol, Expr]], other: frozenset[tuple[Symbol, Expr]]) -> bool:
    put = dict(fixed)
    return all(tidy((s - e).xreplace(put)) == 0 for s, e in other)


def _impossible(s: Symbol, value: Expr) -> bool:
    """Whether the declared sign of a parameter forbids a value."""
    return bool(
        (s.is_positive and value.is_nonpositive)
        or (s.is_negative and value.is_nonnegative)
        or (s.is_nonzero and value.is_zero)
    )


def _primitive(row: Row, nonzero: Row) -> Row:
    """The row divided by its leading number and by what is known not to vanish."""
    head = next((e for e in row if e != 0), None)
    if head is None:
        return row
    lead = head.primitive()[0] if head.is_Add else head.as_coeff_Mul()[0]
    row = tuple(expand(e / lead) for e in row)
    for f in nonzero:
        letters = sorted(f.free_symbols, key=lambda s: s.name)
        while True:
            parts = [div(e, f, *letters) for e in row]
            if any(r != 0 for _, r in parts):
                break
            row = tuple(expand(q) for q, _ in parts)
    return row


def _expression(conditions: Conditions, entry: dict[tuple[int, ...], int]) -> Expr:
    total = S.Zero
    for exponents, c in entry.items():
        total += conditions.ring.term(exponents, c)
    return expand(fraction(together(total))[0])


def _moving(conditions: Conditions) -> list[Expr]:
    """Generators that depend on the coordinates and are not coordinates."""
    x = set(conditions.coordinates)
    return [g for g in conditions.ring.items if g.free_symbols & x and g not in x]
