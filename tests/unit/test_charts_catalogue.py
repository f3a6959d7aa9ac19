"""Every coordinate system of the catalogue against the definitions it must meet."""

import random

import pytest
import sympy as sp

from hjsolve.algebra.identity import vanish
from hjsolve.charts import CHARTS
from hjsolve.charts.system import x, y, z
from hjsolve.records import Definition, Domain, Hamiltonian, Parameter, Truth
from hjsolve.separation import detect

EVERY = pytest.mark.parametrize("entry", CHARTS, ids=lambda e: e.name)


def ranges(entry):
    return {q: (d.lower, d.upper) for q, d in zip(entry.coordinates, entry.domains, strict=True)}


def proved(expressions):
    return [f.truth for f in vanish(expressions)] == [Truth.PROVED] * len(expressions)


def hamiltonian(entry, potential, functions=()):
    p = tuple(sp.Symbol(f"p_{q.name}", real=True) for q in entry.coordinates)
    kinetic = sum(pi**2 / (2 * s) for pi, s in zip(p, entry.squares, strict=True))
    return Hamiltonian(
        expression=kinetic + potential,
        coordinates=entry.coordinates,
        momenta=p,
        domains=tuple(d if d.kind != "interval" else Domain() for d in entry.domains),
        parameters=tuple(Parameter(s, "real") for s in entry.shape),
        numbers=(),
        functions=tuple(functions),
        time=sp.Symbol("t", real=True),
    )


def point(entry, rng):
    """A point of the domain, with shape parameters in their order."""
    drawn = sorted(rng.uniform(0.2, 3) for _ in entry.shape)
    shape = {
        s: sp.Float(v + k, 40) for k, (s, v) in enumerate(zip(entry.shape, drawn, strict=True))
    }
    at = {}
    for q, d in zip(entry.coordinates, entry.domains, strict=True):
        low, high = (sp.S(e).xreplace(shape) for e in (d.lower, d.upper))
        low = low if low.is_finite else (high - 3 if high.is_finite else sp.Integer(-3))
        high = high if high.is_finite else low + 6
        at[q] = low + sp.Float(rng.uniform(0.02, 0.98), 40) * (high - low)
    return {**shape, **at}


def test_there_are_four_in_the_plane_and_eleven_in_space():
    assert [sum(e.dimension == n for e in CHARTS) for n in (2, 3)] == [4, 11]
    assert len({e.name for e in CHARTS}) == len(CHARTS)
    assert all(e.source and e.examples and e.geometry for e in CHARTS)


@EVERY
def test_the_scale_factors_are_those_of_the_map(entry):
    jacobian = sp.Matrix(entry.place).jacobian(entry.coordinates)
    gram = jacobian.T * jacobian - sp.diag(*entry.squares)
    n = entry.dimension
    assert proved([gram[i, j] for i in range(n) for j in range(i, n)])


@EVERY
def test_the_staeckel_matrix_is_one(entry):
    for q, row in zip(entry.coordinates, entry.staeckel, strict=True):
        assert all(e.free_symbols <= {q, *entry.shape} for e in row)
    n = entry.dimension
    assert proved(
        [
            sum(entry.staeckel[i][j] / entry.squares[i] for i in range(n)) - int(j == 0)
            for j in range(n)
        ]
    )
    determinant = sp.Matrix(entry.staeckel).det()
    assert vanish([determinant])[0].truth is Truth.REFUTED


@EVERY
def test_the_potential_is_the_general_separable_one(entry):
    assert detect(hamiltonian(entry, entry.potential, "fgh")).separability == "complete"


@EVERY
def test_a_product_is_no_separable_potential(entry):
    product = sp.Mul(*entry.coordinates, *(q + 1 for q in entry.coordinates))
    assert detect(hamiltonian(entry, product)).separability in {"none", "partial"}


@EVERY
def test_the_inverse_undoes_the_map(entry):
    rng = random.Random(entry.name)
    for _ in range(8):
        at = point(entry, rng)
        where = dict(
            zip((x, y, z), (sp.S(e).xreplace(at).evalf(40) for e in entry.place), strict=False)
        )
        where |= {s: at[s] for s in entry.shape}
        for q, back in zip(entry.coordinates, entry.inverse, strict=True):
            if isinstance(back, Definition):
                polynomial = sp.Poly(back.root_of.xreplace(where), back.unknown)
                value = sorted(sp.re(v) for v in polynomial.nroots(n=20))[back.index - 1]
            else:
                value = sp.S(back).xreplace(where).evalf(30)
            difference = float(value - at[q])
            if entry.domains[entry.coordinates.index(q)].kind == "angle":
                difference = (difference + 3) % (2 * 3.141592653589793) - 3
            assert abs(difference) < 1e-8


@EVERY
def test_what_is_called_positive_is(entry):
    rng = random.Random(entry.name)
    for _ in range(20):
        at = point(entry, rng)
        assert all(sp.S(e).xreplace(at).evalf() > 0 for e in entry.positive)
