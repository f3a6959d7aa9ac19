"""The certificate: every claim an answer makes, checked by a route of its own.

The checks go back to H and the separated momenta; none repeats the way by
which a result was found.  A refuted check is a fault of this program and
raises, so that it never ships as an answer; "undecided" ships, labelled.
"""

from __future__ import annotations

import time
from collections.abc import Callable, Sequence
from functools import partial
from itertools import product

import sympy as sp
from sympy import Expr, Integral, Symbol
from sympy.core.relational import Relational

from hjsolve.algebra.brackets import brackets, independent
from hjsolve.algebra.budget import limit
from hjsolve.algebra.calculus import put_in
from hjsolve.algebra.identity import Finding, vanish
from hjsolve.algebra.named import Names
from hjsolve.algebra.regimes import has_value, inside, regime
from hjsolve.algebra.sampling import Range
from hjsolve.certification.along import vanish_along
from hjsolve.certification.cycles import cycle_claims
from hjsolve.certification.forms import differentiated
from hjsolve.certification.parametrised import parametrised
from hjsolve.errors import Fault, OutOfTime
from hjsolve.records import (
    Antiderivative,
    Certificate,
    Check,
    CompleteIntegral,
    Formula,
    Hamiltonian,
    Motion,
    Parametrisation,
    Part,
    SeparatedEquation,
    Separation,
    Truth,
)

ZERO_METHODS = {
    "modular": "identity modulo a random prime; bound: probability of a false zero",
    "balls": "ball arithmetic at points of the domain; bound: size of the balls",
}
CLAIM_SECONDS, ALL_SECONDS = 4.0, 18.0
"""How long one claim may take, and all of them; what is not done by then is undecided."""

FORMS_SECONDS = 3.0
"""How long the closed forms of one coordinate may take; those proved by then stay proved."""

Claim = tuple[str, Callable[[], list[Check]], Part | None]
"""What is claimed, its checks, and what goes if they are refuted: a part of the motion, a
term's cycles."""

BRANCH_LIMIT = 3
"""With more coordinates of two branches, the branches are checked at random signs."""


def certify(
    separation: Separation, integral: CompleteIntegral | None, motion: Motion | None
) -> Certificate:
    """All checks that the answer allows.

    Raises:
        Fault: a check was refuted.
    """
    h = separation.hamiltonian
    ranges = {
        q: (d.lower, d.upper)
        for q, d in zip(h.coordinates, h.domains, strict=True)
        if d.lower.is_finite
    }
    claims: list[Claim] = [
        ("the verdict", lambda: [_verdict(separation)], None),
        ("the first integrals", lambda: _first_integrals(separation, ranges), None),
    ]
    if len(separation.equations) == len(h.coordinates):
        claims += [
            ("the Hamilton–Jacobi equation", lambda: [_equation(separation, ranges)], None),
            ("independence", lambda: [_independence(separation, ranges)], None),
        ]
    for term in integral.terms if integral is not None else ():
        what = f"the closed forms of W_{term.equation.coordinate.name}"
        claims.append((what, partial(_quadratures, term.drift, term.root, h, ranges), None))
    if motion is not None:
        claims += _motion(separation, motion, ranges)
    if integral is not None:
        claims += cycle_claims(integral, h)
    checks: list[Check] = []
    stop = time.monotonic() + ALL_SECONDS
    left_out: list[Part] = []
    for what, check, part in claims:
        try:
            with limit(max(min(CLAIM_SECONDS, stop - time.monotonic()), 0.05)):
                done = check()
        except OutOfTime:
            done = [Check(f"{what}: stopped at its time limit", Truth.UNDECIDED, "none")]
        refuted = next((c for c in done if c.verdict is Truth.REFUTED), None)
        if refuted is not None and part is None:
            raise Fault(f"refuted by its own certificate: {refuted.claim}")
        if refuted is not None and part is not None:
            left_out.append(part)
            text = f"refuted by its own certificate and left out: {refuted.claim}"
            done = [Check(text, Truth.UNDECIDED, "none")]
        checks += done
    return Certificate(tuple(checks), tuple(left_out))


def _verdict(separation: Separation) -> Check:
    v = separation.verdict
    claim = f"the verdict is {v.separability}, with the blocks as listed"
    if v.separability == "undecided":
        return Check(claim, Truth.UNDECIDED, v.limit or "a limit was reached")
    method = (
        "Levi-Civita's expressions: zeros modulo a random prime, non-zeros in ball arithmetic; "
        "bound: probability of a false zero"
        if v.proof == "symbolic"
        else "Levi-Civita's expressions in ball arithmetic; bound: size of what is called zero"
    )
    truth = Truth.PROVED if v.proof == "symbolic" else Truth.UNDECIDED
    return Check(claim, truth, method, v.bound)


def _check(claim: str, findings: Sequence[Finding]) -> Check:
    """One claim that several expressions vanish."""
    worst = next((f for f in findings if f.truth is Truth.REFUTED), None) or next(
        (f for f in findings if f.truth is Truth.UNDECIDED), None
    )
    if worst is not None:
        bound = None if worst.truth is Truth.REFUTED else worst.bound
        method = ZERO_METHODS.get(worst.method, worst.method)
        if worst.truth is Truth.UNDECIDED and worst.bound is None:
            method = "no point was found at which the expression is real; nothing is known"
        return Check(claim, worst.truth, method, bound)
    bound = max((f.bound or 0.0 for f in findings), default=0.0)
    return Check(claim, Truth.PROVED, ZERO_METHODS["modular"], bound)


# ------------------------------------------------------------ conservation


def _first_integrals(separation: Separation, ranges: dict[Symbol, Range]) -> list[Check]:
    h = separation.hamiltonian
    known = [c for c in separation.constants if c.first_integral is not None]
    if not known:
        return []
    integrals = [c.first_integral for c in known]
    names = ", ".join(c.symbol.name for c in known)
    commuting, conserved = brackets(h, integrals, ranges, separation.extended)
    checks = [_check(f"the first integrals {names} are constant along the motion", conserved)]
    if commuting:
        checks.append(
            _check(f"the first integrals {names} are in involution with one another", commuting)
        )
    return checks


# --------------------------------------------------------- the equation


def _branches(equations: Sequence[SeparatedEquation]) -> list[dict[Symbol, Expr]]:
    signs = [e.sign for e in equations if e.root != 0]
    if len(signs) > BRANCH_LIMIT:
        alternating = [
            {s: sp.Integer((-1) ** (n + k)) for n, s in enumerate(signs)} for k in (0, 1)
        ]
        same = [dict.fromkeys(signs, sp.Integer(v)) for v in (1, -1)]
        return alternating + same
    choices = product((sp.S.One, sp.S.NegativeOne), repeat=len(signs))
    return [dict(zip(signs, c, strict=True)) for c in choices]


def _equation(separation: Separation, ranges: dict[Symbol, Range]) -> Check:
    """S solves the Hamilton–Jacobi equation: H(q, p(q; α), t) + ∂S/∂t = 0."""
    h = separation.hamiltonian
    claim = "S solves the Hamilton–Jacobi equation on every branch of the momenta"
    if separation.time_momentum is None or any(e.where for e in separation.equations):
        return Check(claim, Truth.UNDECIDED, "a momentum or time has no explicit formula")
    residues = []
    conditions = list(dict.fromkeys(v for e in separation.equations for v in e.valid))
    for branch in _branches(separation.equations):
        put = {e.momentum: e.solution.xreplace(branch) for e in separation.equations}
        residues.append(h.expression.xreplace(put) + separation.time_momentum)
    positive = [v.rhs for v in conditions]
    return _check(claim, vanish(residues, ranges, h.functions, 60, conditions, positive))


def _independence(separation: Separation, ranges: dict[Symbol, Range]) -> Check:
    """Whether det ∂²S/∂q∂α is not identically zero.

    The momenta p(q, α) invert the first integrals α(q, p), so the determinant
    is 1/det ∂α/∂p, which has no radicals and is finite wherever it is met.
    """
    claim = "det ∂²S/∂q∂α ≠ 0: S is a complete integral"
    integrals = [c.first_integral for c in separation.constants if c.first_integral is not None]
    if len(integrals) != len(separation.equations):
        return Check(claim, Truth.UNDECIDED, "constants are missing")
    found = independent(separation.hamiltonian, integrals, ranges)
    if found.truth is Truth.REFUTED:
        method = "ball arithmetic: a point of phase space at which det ∂α/∂p excludes 0"
        return Check(claim, Truth.PROVED, method, 0.0)
    return Check(claim, Truth.UNDECIDED, "no point was found at which det ∂α/∂p excludes 0")


# -------------------------------------------------------------- quadratures


def _quadratures(
    drift: Antiderivative,
    root: Antiderivative,
    h: Hamiltonian,
    ranges: dict[Symbol, Range],
) -> list[Check]:
    """Each closed form, differentiated back; those that are decided apart from the others."""
    checks = []
    for part, anti in (("", root), (" (part linear in the momentum)", drift)):
        if anti.integrand == 0 or not anti.closed_forms:
            continue
        q = anti.variable
        claim = f"the closed forms of W_{q.name}{part} differentiate back to its integrand"
        decided: dict[int, list[Finding]] = {}
        open_: dict[int, list[Finding]] = {}
        stop = time.monotonic() + FORMS_SECONDS
        numbered = enumerate(anti.closed_forms, 1)
        for n, form in sorted(numbered, key=lambda f: len(f[1].where)):
            found = [Finding(Truth.UNDECIDED, "an integral is left as it stands", 0.0)]
            if not form.expression.has(Integral):
                try:
                    with limit(max(stop - time.monotonic(), 0.01)):
                        found = differentiated(form, anti, h, ranges, _inside(h, q))
                except OutOfTime:
                    found = [Finding(Truth.UNDECIDED, "stopped at its time limit", 0.0)]
            known = all(f.truth is not Truth.UNDECIDED for f in found)
            (decided if known else open_)[n] = found
        for group in (decided, open_):
            if group:
                which = ", ".join(map(str, sorted(group)))
                some = f" (forms {which} of {len(anti.closed_forms)})" if decided and open_ else ""
                checks.append(_check(claim + some, [f for fs in group.values() for f in fs]))
    return checks


def _inside(h: Hamiltonian, q: Symbol) -> tuple[Relational, ...]:
    """The ends of an interval with letters in them, as conditions on q."""
    domain = dict(zip(h.coordinates, h.domains, strict=True))[q]
    if domain.kind != "interval" or (domain.lower.is_number and domain.upper.is_number):
        return ()
    return (sp.Lt(domain.lower, q, evaluate=False), sp.Lt(q, domain.upper, evaluate=False))


# ------------------------------------------------------------------- motion


def _motion(separation: Separation, motion: Motion, ranges: dict[Symbol, Range]) -> list[Claim]:
    """q̇ = ∂H/∂p and ṗ = −∂H/∂q for the coordinates that are explicit."""
    h = separation.hamiltonian
    momentum = dict(zip(h.coordinates, h.momenta, strict=True))
    known = {s: f for s, f in (*motion.coordinates, *motion.momenta) if f is not None}
    cases: list[tuple[Symbol, dict[Symbol, Formula], str, Part | None]] = [
        (q, known, "", None) for q in h.coordinates if q in known and momentum[q] in known
    ]
    for n, other in enumerate(motion.others, 1):
        q = other.coordinate
        changed = known | {q: other.motion, momentum[q]: other.momentum}
        cases.append((q, changed, f" in regime {n} of the further ones", other))
    claims: list[Claim] = [
        (
            f"Hamilton's equations of {q.name}{where}",
            partial(_hamilton, separation, q, momentum[q], f, where, ranges),
            part,
        )
        for q, f, where, part in cases
    ]
    for n, given in enumerate(motion.parametrisations, 1):
        check = partial(_by, separation, given, n, ranges)
        claims.append((f"the motion by {given.parameter.name}", check, given))
    return claims


def _by(
    separation: Separation, given: Parametrisation, number: int, ranges: dict[Symbol, Range]
) -> list[Check]:
    """Hamilton's equations along a motion given by a parameter, on the first and last branch."""
    names = ", ".join(q.name for q, _ in given.coordinates)
    claim = (
        f"{names} as functions of {given.parameter.name} satisfy Hamilton's equations "
        f"in parametrisation {number}"
    )
    branches = _branches(separation.equations)
    findings = parametrised(separation, given, branches[:1] + branches[-1:], ranges)
    if not findings:
        return [Check(claim, Truth.UNDECIDED, "it rests on a coordinate left implicit")]
    return [_check(claim, findings)]


def _hamilton(
    separation: Separation,
    q: Symbol,
    p: Symbol,
    formulas: dict[Symbol, Formula],
    where: str,
    ranges: dict[Symbol, Range],
) -> list[Check]:
    """Hamilton's equations for one pair, along ``formulas``, on the first and last branch."""
    h = separation.hamiltonian
    known = {s: f.expression for s, f in formulas.items()}
    claim = f"{q.name}({h.time.name}), {p.name}({h.time.name}) satisfy Hamilton's equations{where}"
    rate, force = sp.diff(h.expression, p), -sp.diff(h.expression, q)
    needed = (rate.free_symbols | force.free_symbols) & {*h.coordinates, *h.momenta} | {q, p}
    if not needed <= set(known):
        return [Check(claim, Truth.UNDECIDED, "it rests on a coordinate left implicit")]
    valid = (*dict.fromkeys(v for s in needed for v in formulas[s].valid), *_inside(h, q))
    defined = tuple(dict.fromkeys(d for s in needed for d in formulas[s].where))
    names = Names(defined) if defined else None
    domain = dict(zip(h.coordinates, h.domains, strict=True))
    findings: list[Finding] = []
    branches = _branches(separation.equations)
    for branch in branches[:1] + branches[-1:]:
        put = {s: e.xreplace(branch) for s, e in known.items()}
        kept = names.held if names is not None else ()
        signs, conditions = regime(tuple(v.xreplace(put) for v in valid), kept)
        residues = [
            (sp.diff(put[q], h.time) - put_in(rate, put)).xreplace(signs),
            (sp.diff(put[p], h.time) - put_in(force, put)).xreplace(signs),
        ]
        at = put[q].xreplace(signs)
        conditions += [has_value(at), *inside(domain[q], at)]
        findings += vanish_along(residues, ranges, h.functions, conditions, names)
    return [_check(claim, findings)]
