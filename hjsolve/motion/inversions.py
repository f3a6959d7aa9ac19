"""From F(q) = τ to q(τ): the kinds of form that have an inverse.

To add one: write a function that returns the candidates for q(τ), and add a
line to INVERSIONS with its source and an example; the tests run over the
registry.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import sympy as sp
from sympy import Add, Dummy, Expr, Symbol
from sympy.core.relational import Relational

from hjsolve.algebra.functions import jacobi_am, jacobi_cn, jacobi_dn, jacobi_sn
from hjsolve.algebra.identity import refute
from hjsolve.algebra.isolate import isolate
from hjsolve.algebra.named import Names
from hjsolve.records import Domain, Truth

Invert = Callable[[Expr, Symbol, Symbol], tuple[Expr, ...]]


@dataclass(frozen=True, slots=True)
class Inversion:
    """A kind of inversion: the candidates q(τ) for F(q) = τ, the likelier first."""

    name: str
    source: str
    invert: Invert
    examples: tuple[tuple[str, str], ...]


def _linear(form: Expr, q: Symbol, tau: Symbol) -> tuple[Expr, ...]:
    rate = sp.diff(form, q)
    if rate.has(q) or rate == 0:
        return ()
    return ((tau - form.subs(q, 0)) / rate,)


def _single(form: Expr, q: Symbol, tau: Symbol) -> tuple[Expr, ...]:
    found = isolate(form, tau, q)
    if found is None:
        return ()
    candidates = _about(found.centre, found.half)
    if not found.centre.has(sp.pi):
        return candidates
    # the two values of the inverse sine, the one about 0 first
    return tuple(sp.expand(c.replace(sp.acos, _through_asin)) for c in reversed(candidates))


def _through_asin(v: Expr) -> Expr:
    return sp.pi / 2 - sp.asin(v)


def _root_of_quadratic(form: Expr, q: Symbol, tau: Symbol) -> tuple[Expr, ...]:
    """c·√(a q² + b q + d) + e = τ."""
    rest, root = form.as_independent(q, as_Add=True)
    factor, root = root.as_independent(q, as_Add=False)
    if not (isinstance(root, sp.Pow) and root.exp == sp.Rational(1, 2)):
        return ()
    if not root.base.is_polynomial(q) or sp.degree(root.base, q) != 2:
        return ()
    d, b, a = (sp.Poly(root.base, q).coeff_monomial(q**k) for k in range(3))
    inside = b**2 - 4 * a * (d - ((tau - rest) / factor) ** 2)
    return _about(-b / (2 * a), sp.sqrt(sp.expand(inside / (4 * a**2))))


def _jacobi(form: Expr, q: Symbol, tau: Symbol) -> tuple[Expr, ...]:
    """c·F(φ(q), m) + d = τ: φ = am((τ − d)/c, m)."""
    integrals = [f for f in form.atoms(sp.elliptic_f) if f.has(q)]
    if len(integrals) != 1:
        return ()
    (integral,) = integrals
    phi, m = integral.args
    whole = Dummy("F", real=True)
    outer = isolate(form.xreplace({integral: whole}), tau, whole)
    if outer is None or outer.half != 0 or form.xreplace({integral: whole}).has(q) or m.has(q):
        return ()
    amplitude = Dummy("A", real=True)
    inner = isolate(phi, amplitude, q, fractions=True)
    if inner is None:
        return ()
    found: list[Expr] = []
    for e in _about(inner.centre, inner.half):
        if inner.centre.has(sp.pi):
            # asin v before π − asin v
            found.insert(0, sp.expand(e.replace(sp.acos, _through_asin)))
        else:
            found.append(e)
    return tuple(_in_jacobi(e, amplitude, outer.centre, m) for e in found)


def _in_jacobi(path: Expr, amplitude: Symbol, u: Expr, m: Expr) -> Expr:
    """A function of the amplitude in sn, cn, dn of (u, m)."""
    s, c = jacobi_sn(u, m), jacobi_cn(u, m)
    half = amplitude / 2
    path = path.replace(sp.tan, lambda x: _tangent(x, amplitude))
    path = path.xreplace(
        {
            sp.tan(half): s / (1 + c),
            sp.tan(amplitude): s / c,
            sp.sin(amplitude): s,
            sp.cos(amplitude): c,
        }
    )
    path = path.xreplace({amplitude: jacobi_am(u, m)})
    s = next(iter(s.atoms(jacobi_sn)), s)  # without the sign of u
    put = {}
    for power in path.atoms(sp.Pow):
        if power.exp != sp.Rational(1, 2) or not power.base.has(s):
            continue
        square = Dummy()
        base = sp.expand(power.base).xreplace({s**2: square})
        if base.has(s) or sp.diff(base, square, 2) != 0:
            continue
        at, rate = base.subs(square, 0), sp.diff(base, square)
        if sp.cancel(rate + m * at) == 0:
            put[power] = sp.sqrt(sp.factor_terms(at)) * jacobi_dn(u, m)
    return path.xreplace(put)


def _tangent(x: Expr, amplitude: Symbol) -> Expr:
    """tan(amplitude + c) by tan(amplitude) and tan c."""
    shift, moving = x.as_independent(amplitude, as_Add=True)
    if shift == 0 or moving != amplitude:
        return sp.tan(x)
    a, b = sp.tan(amplitude), sp.tan(shift)
    return (a + b) / (1 - a * b)


def _about(centre: Expr, half: Expr) -> tuple[Expr, ...]:
    return (centre,) if half == 0 else (centre + half, centre - half)


INVERSIONS = (
    Inversion("linear", "elementary algebra", _linear, (("q/a", "a*tau"),)),
    Inversion(
        "single-occurrence",
        "inverse circular, hyperbolic and exponential functions, DLMF 4.23, 4.37 (from memory)",
        _single,
        (
            ("asin(q/a)/w", "a*sin(tau*w)"),
            ("log(q)", "exp(tau)"),
            ("asin(2*sin(q))", "asin(sin(tau)/2)"),
        ),
    ),
    Inversion(
        "amplitude",
        "Jacobi's elliptic functions, DLMF 22.15, 22.16 (from memory)",
        _jacobi,
        (
            ("elliptic_f(asin(q/a), k)/w", "a*jacobi_sn(tau*w, k)"),
            ("elliptic_f(q/2, k)", "2*jacobi_am(tau, k)"),
            ("-elliptic_f(acos(q), k)", "jacobi_cn(tau, k)"),
        ),
    ),
    Inversion(
        "root-of-a-quadratic",
        "the quadratic formula",
        _root_of_quadratic,
        (("sqrt(q**2 + 2*q - 3)", "-1 + sqrt(4 + tau**2)"),),
    ),
)


def invert(
    form: Expr,
    q: Symbol,
    tau: Symbol,
    domain: Domain,
    valid: Sequence[Relational],
    admissible: Callable[[Expr], bool] = lambda _path: True,
    names: Names | None = None,
) -> list[tuple[Expr, tuple[Relational, ...]]]:
    """Every q(τ) with form(q) = τ, with what it needs beyond ``valid``.

    A candidate is put back into the form; where that contradicts τ near τ = 0
    inside the regime, it belongs to another branch.  Of two values about a
    common centre each is right on its own side only, and says so.
    ``admissible`` is the caller's own check of a candidate, ``names`` are those
    that the form introduces.
    """
    for inversion in INVERSIONS:
        candidates = inversion.invert(form, q, tau)
        good = [
            path
            for path in candidates
            if (len(candidates) == 1 or any(returns(form, q, tau, path, domain, valid, names)))
            and admissible(path)
        ]
        if not good:
            continue
        if len(candidates) == 1:
            return [(good[0], ())]
        centre = sp.expand(Add(*candidates) / 2)
        if centre.has(tau):
            return [(path, ()) for path in good]
        return [(path, _side(path - centre, centre, q, tau)) for path in good]
    return []


def _side(half: Expr, centre: Expr, q: Symbol, tau: Symbol) -> tuple[Relational, ...]:
    """The side of the centre on which q = centre + half runs, where it keeps to one."""
    for sign, relation in ((1, sp.Lt(centre, q)), (-1, sp.Lt(q, centre))):
        keeps = refute(sp.Abs(half) - sign * half, {tau: (-sp.Rational(1, 5), sp.Rational(1, 5))})
        if keeps.truth is Truth.UNDECIDED and keeps.bound is not None:
            return (relation,)
    return ()


def returns(
    form: Expr,
    q: Symbol,
    tau: Symbol,
    path: Expr,
    domain: Domain,
    valid: Sequence[Relational],
    names: Names | None = None,
) -> tuple[bool, bool]:
    """Whether form(path) = τ in balls, for τ a little above 0 and a little below."""
    # at a boundary, a ≤ b and b ≤ a, the symbol is gone from the form
    conditions = [v.xreplace({q: path}) for v in valid if v.rel_op in ("<", ">")]
    if domain.lower.is_number and domain.lower.is_finite:
        conditions.append(sp.Lt(domain.lower, path, evaluate=False))
    residue = form.xreplace({q: path}) - tau
    found = []
    for side in (sp.S.One, sp.S.NegativeOne):
        ends = sorted((side / 50, side / 5))
        finding = refute(residue, {tau: (ends[0], ends[1])}, (), 40, conditions, names=names)
        found.append(finding.truth is Truth.UNDECIDED and finding.bound is not None)
    return found[0], found[1]
