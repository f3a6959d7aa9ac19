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
from hjsolve.algebra.isolate import Isolated, isolate, linear_fraction
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
    return _values(found)


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


def _squared(form: Expr, q: Symbol, tau: Symbol) -> tuple[Expr, ...]:
    """Undo √R + c = τ for R linear fractional in one function of q, in e^{aq} too."""
    rest, root = form.as_independent(q, as_Add=True)
    letter = Dummy("w", positive=True)
    inner, u = _in_exponential(root**2, q, letter)
    value = (tau - rest) ** 2
    if any(p.exp.is_Rational and p.exp.q != 1 and p.has(letter, q) for p in inner.atoms(sp.Pow)):
        return ()
    inner = sp.cancel(sp.together(inner))
    if u is None:
        found = isolate(inner, value, q, fractions=True)
        return () if found is None else _about(found.centre, found.half)
    found = isolate(inner, value, letter, fractions=True)
    if found is None or found.half != 0 or inner.has(q):
        return ()
    outer = isolate(u, found.centre, q)
    return () if outer is None else _about(outer.centre, outer.half)


def _logarithms(form: Expr, q: Symbol, tau: Symbol) -> tuple[Expr, ...]:
    """Undo c·log u − c·log v + d, with u/v linear fractional in one function of q."""
    rest, moving = form.as_independent(q, as_Add=True)
    ratio: Expr = sp.S.One
    common: Expr | None = None
    for term in Add.make_args(moving):
        factor, log = term.as_independent(q, as_Add=False)
        if not isinstance(log, sp.log):
            return ()
        common = common or factor
        power = sp.cancel(factor / common)
        if power not in (1, -1):
            return ()
        ratio *= log.args[0] ** power
    if common is None:
        return ()
    # by e^w or by t = tanh(w/2), whichever is shorter
    t, letter, w = Dummy("t", real=True), Dummy("v", positive=True), (tau - rest) / common
    step = linear_fraction(sp.together(ratio), letter, q)
    if step is None:
        return ()
    u, value, _ = step
    by_tanh = sp.cancel(value.xreplace({letter: (1 + t) / (1 - t)}))
    value = sp.cancel(value)
    shorter = by_tanh.count_ops() < value.count_ops()
    put = {t: sp.tanh(w / 2)} if shorter else {letter: sp.exp(w)}
    found = isolate(u, (by_tanh if shorter else value).xreplace(put), q)
    return () if found is None else _values(found)


def _values(found: Isolated) -> tuple[Expr, ...]:
    """The one or two values; of an inverse sine the one about 0 first."""
    candidates = _about(found.centre, found.half)
    if not found.centre.has(sp.pi):
        return candidates
    return tuple(sp.expand(c.replace(sp.acos, _through_asin)) for c in reversed(candidates))


def _in_exponential(e: Expr, q: Symbol, letter: Symbol) -> tuple[Expr, Expr | None]:
    """The exponentials in e as powers of one of them, and that one."""
    found = sorted((f for f in e.atoms(sp.exp) if f.has(q)), key=sp.default_sort_key)
    if not found:
        return e, None
    powers = {f: sp.cancel(f.args[0] / found[0].args[0]) for f in found}
    if not all(n.is_Integer for n in powers.values()):
        return e, None
    return e.xreplace({f: letter**n for f, n in powers.items()}), found[0]


def _cubic_in_a_root(form: Expr, q: Symbol, tau: Symbol) -> tuple[Expr, ...]:
    """(A q + B)√(a + b q) + c = τ: a cubic s³ + P s = T in the root s, solved for P > 0."""
    rest, moving = form.as_independent(q, as_Add=True)
    roots = {p for p in moving.atoms(sp.Pow) if p.exp == sp.Rational(1, 2) and p.has(q)}
    if len(roots) != 1:
        return ()
    (root,) = roots
    factor = sp.cancel(moving / root)
    if not all(e.is_polynomial(q) and sp.degree(e, q) == 1 for e in (factor, root.base)):
        return ()
    (B, A), (a, b) = (
        [sp.Poly(e, q).coeff_monomial(q**n) for n in (0, 1)] for e in (factor, root.base)
    )
    p, t = sp.cancel(B * b / A - a), b * (tau - rest) / A
    s = 2 * sp.sqrt(p / 3) * sp.sinh(sp.asinh(3 * t * sp.sqrt(3 / p) / (2 * p)) / 3)
    return ((s**2 - a) / b,)


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
    return tuple(_in_jacobi(e, amplitude, outer.centre, m) for e in _values(inner))


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
    return with_delta(path)


def with_delta(e: Expr) -> Expr:
    """√(1 − m sn²(u, m)) as dn(u, m), for m < 1."""
    put = {}
    for power in e.atoms(sp.Pow):
        if not (power.exp.is_Rational and power.exp.q == 2):
            continue
        for s in power.base.atoms(jacobi_sn):
            square, (u, m) = Dummy(), s.args
            base = sp.expand(power.base.xreplace({s**2: square}))
            if base.has(s) or sp.diff(base, square, 2) != 0:
                continue
            at, rate = base.subs(square, 0), sp.diff(base, square)
            if sp.cancel(rate + m * at) == 0:
                put[power] = (sp.sqrt(sp.factor_terms(at)) * jacobi_dn(u, m)) ** (2 * power.exp)
    return e.xreplace(put)


def _tangent(x: Expr, amplitude: Symbol) -> Expr:
    """tan(amplitude + c) by tan(amplitude) and tan c."""
    shift, moving = x.as_independent(amplitude, as_Add=True)
    if shift == 0 or moving != amplitude:
        return sp.tan(x)
    a, b = sp.tan(amplitude), sp.tan(shift)
    return (a + b) / (1 - a * b)


def _about(centre: Expr, half: Expr) -> tuple[Expr, ...]:
    return (centre,) if half == 0 else (centre + half, centre - half)


ENOUGH = 3
"""Points at which a path that is put back must give its parameter."""

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
        "logarithms",
        "elementary algebra",
        _logarithms,
        (("log(1 + sin(q)) - log(1 - sin(q))", "asin(tanh(tau/2))"),),
    ),
    Inversion(
        "square-of-a-root",
        "elementary algebra",
        _squared,
        (("sqrt(2*exp(-q) - exp(-2*q))*exp(q)", "log((tau**2 + 1)/2)"),),
    ),
    Inversion(
        "cubic-in-a-root",
        "Barker's equation; the cubic by hyperbolic functions (Holmes 2002; from memory)",
        _cubic_in_a_root,
        (("(q + 2)*sqrt(q - 1)", "4*sinh(asinh(tau/2)/3)**2 + 1"),),
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
        ends = sorted((side / 90, side / 25))
        finding = refute(residue, {tau: (ends[0], ends[1])}, (), 40, conditions, ENOUGH, names)
        found.append(finding.truth is Truth.UNDECIDED and finding.bound is not None)
    return found[0], found[1]
