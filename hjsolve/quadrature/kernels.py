"""Which kernels are worth trying for an integrand (Bioche's rules, with domains)."""

from __future__ import annotations

from collections.abc import Iterator
from math import gcd, lcm

import sympy as sp
from sympy import Add, Expr, Mul, Pow, Rational, Symbol

from hjsolve.quadrature.circular import circular
from hjsolve.quadrature.hyperbolic import exponential, hyperbolic
from hjsolve.quadrature.kernel import CIRCULAR, HYPERBOLIC, Kernel
from hjsolve.quadrature.powers import powers, square
from hjsolve.quadrature.ratios import GivenUp
from hjsolve.records import Domain


def candidates(integrand: Expr, variable: Symbol, domain: Domain) -> Iterator[Kernel]:
    """The kernels worth trying, most natural first; raises GivenUp when there is none."""
    outside, functions = _shape(integrand, variable)
    if not functions:
        yield from powers(integrand, variable, domain)
        return
    if outside:
        raise GivenUp(f"{variable} occurs both inside and outside of transcendental functions")
    base, multiples = _common_argument([f.args[0] for f in functions], variable)
    kinds = {type(f) for f in functions}
    if kinds <= set(CIRCULAR):
        yield from circular(base, multiples, variable, domain)
    elif kinds <= {sp.exp, *HYPERBOLIC}:
        if kinds == {sp.exp}:
            yield exponential(base, multiples, variable, domain)
        else:
            yield from hyperbolic(base, multiples, variable, domain)
            yield exponential(base, multiples, variable, domain)
    else:
        raise GivenUp("circular and exponential functions, or others, are mixed")


def further(integrand: Expr, variable: Symbol, domain: Domain) -> Iterator[Kernel]:
    """The square of the variable, and half the argument of a function.

    u = sin(θ/2) makes the radicand of cos θ an even quartic.
    """
    outside, functions = _shape(integrand, variable)
    if not functions:
        yield from square(integrand, variable, domain)
    if outside or not functions:
        return
    base, multiples = _common_argument([f.args[0] for f in functions], variable)
    kinds = {type(f) for f in functions}
    doubled = {a: 2 * n for a, n in multiples.items()}
    if kinds <= set(CIRCULAR):
        yield from (
            k
            for k in circular(base / 2, doubled, variable, domain)
            if isinstance(k.expression, (sp.sin, sp.cos))
        )
    elif kinds <= {sp.exp, *HYPERBOLIC}:
        yield from (
            k
            for k in hyperbolic(base / 2, doubled, variable, domain)
            if isinstance(k.expression, (sp.sinh, sp.cosh))
        )


def _shape(integrand: Expr, q: Symbol) -> tuple[bool, list[Expr]]:
    """(does q occur outside of functions, the functions of q)."""
    outside, stack = False, [integrand]
    functions: dict[Expr, None] = {}
    seen: set[Expr] = set()
    while stack:
        e = stack.pop()
        if e in seen or not e.has(q):
            continue
        seen.add(e)
        if e == q:
            outside = True
        elif isinstance(e, (Add, Mul)):
            stack.extend(e.args)
        elif isinstance(e, Pow) and isinstance(e.exp, Rational):
            stack.append(e.base)
        elif isinstance(e, (sp.exp, *CIRCULAR, *HYPERBOLIC)):
            functions[e] = None
        else:
            raise GivenUp(f"{type(e).__name__} of {q} is outside of the kernels known here")
    return outside, sorted(functions, key=sp.default_sort_key)


def _common_argument(arguments: list[Expr], q: Symbol) -> tuple[Expr, dict[Expr, int]]:
    """A base linear in q of which every argument is an integer multiple."""
    expanded = {a: sp.expand(a) for a in arguments}
    first = expanded[arguments[0]]
    rates = {a: sp.diff(x, q) for a, x in expanded.items()}
    ratios = {a: sp.cancel(r / rates[arguments[0]]) for a, r in rates.items()}
    if any(r.has(q) for r in rates.values()) or not all(
        isinstance(r, Rational) and r != 0 for r in ratios.values()
    ):
        raise GivenUp(f"the arguments are no commensurate linear functions of {q}")
    share = Rational(
        gcd(*(int(r.p) for r in ratios.values())), lcm(*(int(r.q) for r in ratios.values()))
    )
    base = first * share
    multiples = {a: int(r / share) for a, r in ratios.items()}
    if any(sp.expand(expanded[a] - n * base) != 0 for a, n in multiples.items()):
        raise GivenUp(f"the arguments are shifted against each other in {q}")
    if len(arguments) == 1:
        base = arguments[0]
    if base.could_extract_minus_sign() and all(n < 0 for n in multiples.values()):
        base, multiples = -base, {a: -n for a, n in multiples.items()}
    return base, multiples
