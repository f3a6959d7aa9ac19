"""A wrong coefficient in the form of any family fools neither its own check nor the certificate."""

from __future__ import annotations

import pytest
import sympy as sp
from test_quadrature import EXAMPLES, expression

from hjsolve.algebra.named import Names
from hjsolve.certification.forms import differentiated
from hjsolve.quadrature import check, integrate
from hjsolve.quadrature.points import Sample, sample
from hjsolve.records import Antiderivative, Formula, Hamiltonian, Truth

SMALL = sp.Rational(1, 10**9)
"""The relative fault."""

FAMILIES = [(f, e) for f, e in EXAMPLES if f.kind != "unevaluated"]


def faulty(form: Formula, q: sp.Symbol) -> list[Formula]:
    """The form with the coefficient of one term a little wrong, term by term."""
    terms = [t for t in sp.Add.make_args(form.expression) if t.has(q)]
    return [Formula(form.expression + SMALL * t, form.where, form.valid) for t in terms]


def points_of(form: Formula, anti: Antiderivative, domain: object) -> Sample | None:
    found = sample(anti.integrand, anti.variable, domain, () if form.where else form.valid)
    if found is None or not form.where:
        return found
    names, kept, extra = Names(form.where), [], []
    for i in range(found.values.shape[1]):
        at = names.at(found.exact(i))
        if at is not None:
            kept.append(i)
            extra.append({s: at[s] for s in names.symbols})
    return Sample(found.symbols, found.values[:, kept], tuple(extra)) if kept else None


@pytest.mark.parametrize(("family", "example"), FAMILIES)
def test_a_wrong_coefficient_is_seen(family, example) -> None:
    integrand, q = expression(example)
    anti = integrate(integrand, q, example.domain)
    domain = example.domain
    h = Hamiltonian(
        integrand, (q,), (sp.Symbol("p"),), (domain,), (), (), (), sp.Symbol("time", real=True)
    )
    ranges = {q: (domain.lower, domain.upper)} if domain.lower.is_finite else {}
    proved = 0
    for form in (f for f in anti.closed_forms if all(v.rel_op != "<=" for v in f.valid)):
        right = differentiated(form, anti, h, ranges, ())
        assert not any(f.truth is Truth.REFUTED for f in right)
        proved += all(f.truth is Truth.PROVED for f in right)
        for wrong in faulty(form, q):
            found = differentiated(wrong, anti, h, ranges, ())
            assert not any(f.truth is Truth.PROVED for f in found), wrong.expression
            points = points_of(wrong, anti, domain)
            if points is not None and not form.where:
                assert not check.holds(wrong.expression, integrand, q, domain, points)
    assert proved, family.name
