"""The space a Cartesian Hamiltonian lives in: kinetic energy and potential."""

from __future__ import annotations

from dataclasses import dataclass

from sympy import Expr, Matrix, S, Symbol, diff, eye

from hjsolve.algebra.generators import NotRational
from hjsolve.charts.exact import Unsure, inverse, root, tidy, zero
from hjsolve.records import Hamiltonian

Rows = tuple[tuple[Expr, ...], ...]


class NotNatural(Exception):
    """H is not ½ pᵀGp + V(x) with constant G; the message says what it is."""


@dataclass(frozen=True, slots=True)
class Space:
    """H = ½ pᵀGp + V(x).

    ``gram`` is G, n × n.  Where G is a multiple of the unit matrix, ``weight``
    is that multiple and ``mass_map`` is None; else y = mass_map · x is Cartesian
    with unit mass (A G Aᵀ = 1, A lower triangular, positive on the diagonal).
    """

    hamiltonian: Hamiltonian
    gram: Rows
    potential: Expr
    weight: Expr
    mass_map: Rows | None

    @property
    def coordinates(self) -> tuple[Symbol, ...]:
        """The coordinates of the request."""
        return self.hamiltonian.coordinates

    @property
    def dimension(self) -> int:
        """The number of coordinates."""
        return len(self.gram)

    @property
    def map(self) -> Matrix:
        """A in y = A x."""
        return Matrix(self.mass_map) if self.mass_map else eye(self.dimension)


def space(hamiltonian: Hamiltonian) -> Space:
    """Read the kinetic energy and the potential off a Hamiltonian.

    Raises:
        NotNatural: the kinetic energy is not a quadratic form in the momenta
            alone with constant coefficients, or H depends on time.
    """
    if hamiltonian.explicit_time:
        raise NotNatural("the Hamiltonian depends on time")
    h, p = hamiltonian.expression, hamiltonian.momenta
    rest = dict.fromkeys(p, S.Zero)
    n = len(p)
    gram = [[S.Zero] * n for _ in range(n)]
    variables = {*p, *hamiltonian.coordinates}
    try:
        for i in range(n):
            first = diff(h, p[i])
            if not zero(first.xreplace(rest)):
                raise NotNatural("the Hamiltonian has terms linear in the momenta")
            for j in range(i, n):
                gram[i][j] = gram[j][i] = tidy(diff(first, p[j]))
                if gram[i][j].free_symbols & variables:
                    raise NotNatural(
                        "the kinetic energy is not a quadratic form with constant coefficients: "
                        "the search needs a Hamiltonian given in Cartesian coordinates"
                    )
    except (Unsure, NotRational) as error:
        raise NotNatural(str(error)) from error
    rows = tuple(tuple(row) for row in gram)
    potential = h.xreplace(rest)
    weight, mass_map = _scaling(rows)
    return Space(hamiltonian, rows, potential, weight, mass_map)


def _scaling(gram: Rows) -> tuple[Expr, Rows | None]:
    """(weight, None) for a multiple of the unit matrix, else (1, A)."""
    n = len(gram)
    off = [gram[i][j] if i != j else gram[i][i] - gram[0][0] for i in range(n) for j in range(n)]
    if all(zero(e) for e in off):
        return gram[0][0], None
    lower = [[S.Zero] * n for _ in range(n)]
    for i in range(n):
        for j in range(i + 1):
            left = tidy(gram[i][j] - sum((lower[i][k] * lower[j][k] for k in range(j)), S.Zero))
            if i == j:
                if not left.is_positive:
                    raise NotNatural(f"the kinetic energy is not known to be positive: {left}")
                lower[i][i] = root(left)
            else:
                lower[i][j] = tidy(left / lower[j][j])
    back = inverse(Matrix(lower))
    return S.One, tuple(tuple(tidy(back[i, j]) for j in range(n)) for i in range(n))
