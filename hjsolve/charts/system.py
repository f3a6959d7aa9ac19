"""What a coordinate system of the catalogue is made of."""

from __future__ import annotations

from dataclasses import dataclass

from sympy import Expr, Function, Rational, Symbol, oo, pi

from hjsolve.records import Definition, Domain

x, y, z = (Symbol(name, real=True) for name in "xyz")
"""Cartesian coordinates of a system in standard position."""

f, g, h = (Function(name) for name in "fgh")
"""The arbitrary functions of the general separable potential."""

LINE = Domain()
HALF_LINE = Domain("half-line", Rational(0), oo)
ANGLE = Domain("angle", Rational(0), 2 * pi)
POLAR_ANGLE = Domain("polar-angle", Rational(0), pi)

Row = tuple[Expr, ...]


@dataclass(frozen=True, slots=True)
class CoordinateSystem:
    """An orthogonal coordinate system in standard position.

    ``family`` is its name on the wire, unique within a dimension; ``name`` is
    unique in the registry.  ``place`` holds the n Cartesian coordinates as
    functions of ``coordinates`` and the ``shape`` parameters.  ``inverse`` gives
    each coordinate from the Cartesian ones: a formula, or a root of a
    polynomial.  ``squares`` are the squared scale factors h_i².  ``staeckel``
    is the n × n Stäckel matrix, row i a function of coordinate i alone, with
    Σ_i Φ_ij/h_i² = δ_1j.  ``potential`` is the general separable potential.
    ``positive`` are expressions that are positive all over the domain.
    ``geometry`` names what places the system: the fields of the answer.
    ``examples`` are potentials in standard position that separate there.
    """

    family: str
    source: str
    examples: tuple[str, ...]
    coordinates: tuple[Symbol, ...]
    domains: tuple[Domain, ...]
    place: Row
    inverse: tuple[Expr | Definition, ...]
    squares: Row
    staeckel: tuple[Row, ...]
    potential: Expr
    geometry: tuple[str, ...]
    shape: tuple[Symbol, ...] = ()
    positive: Row = ()

    @property
    def dimension(self) -> int:
        """The number of coordinates."""
        return len(self.coordinates)

    @property
    def name(self) -> str:
        """The name in the registry, such as ``plane/polar``."""
        return f"{'plane' if self.dimension == 2 else 'space'}/{self.family}"


def coordinate(name: str, domain: Domain) -> Symbol:
    """A coordinate with the assumptions of its domain, as ``reading`` makes them."""
    if domain.kind in ("half-line", "polar-angle"):
        return Symbol(name, positive=True)
    return Symbol(name, real=True)
