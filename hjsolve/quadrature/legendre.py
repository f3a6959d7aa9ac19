"""Legendre's normal integrals of a function that is fractional linear in sin²φ, cos φ or tan φ.

With du/√P = g dφ/Δ, Δ = √(1 − m sin²φ), and w = (A + Bz)/(C + Dz) the integrals
∫ w^n du/√P and ∫ du/((w − a)√P) need ∫ dφ/((1 − nz)Δ) and its square only:
Byrd & Friedman 310–341, 361 (from memory, each verified by differentiation);
a circular case with n > 1 goes through Π(n) = F − Π(m/n) + a logarithm, whose
singularities cancel those of the other terms (117.02 there).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from functools import cached_property, lru_cache
from typing import Literal

import sympy as sp
from sympy import Abs, Add, Expr, Mul, S, atan, elliptic_e, elliptic_f, elliptic_pi, log, sqrt

from hjsolve.quadrature.ratios import GivenUp

ONE = S.One

TIDIED = 40
"""Operations of a coefficient above which no shorter way to write it is looked for."""

MANY = 4
"""Terms up to which each has its own factor g, which may cancel against others of it."""


@dataclass(frozen=True)
class Normal:
    """φ(u), m, g and the meaning of z.

    ``sine``, ``cosine``, ``delta`` are ``below`` times sin φ, cos φ, Δ, all
    algebraic functions of u.  ``moebius`` is (A, B, C, D).  ``passes`` says whether
    φ may lie on both sides of the mirror image of a pole, where Π(n) with n > 1 is
    not used.
    """

    phi: Expr
    m: Expr
    weight: Expr
    kind: Literal["square", "cosine", "tangent"]
    moebius: tuple[Expr, Expr, Expr, Expr]
    sine: Expr
    cosine: Expr
    delta: Expr
    below: Expr = ONE
    passes: bool = False


@dataclass
class Sum:
    """Σ coefficient·function, with F, E and each Π collected."""

    normal: Normal
    name: Callable[[str, Expr], Expr] = lambda _stem, value: value
    """May give a long constant a name; the first argument says what it is."""

    terms: dict[Expr, list[Expr]] = field(default_factory=dict)

    def add(self, coefficient: Expr, function: Expr = ONE) -> None:
        """Add coefficient·function."""
        if coefficient != 0 and function != 0:
            self.terms.setdefault(function, []).append(coefficient)

    def expression(self) -> Expr:
        """The sum times g, in one bracket where there are many terms."""
        g = self.normal.weight
        total = [(_tidy(Add(*c)), function) for function, c in self.terms.items()]
        if len(total) > MANY:
            return Mul(g, Add(*(Mul(*term) for term in total)))
        return Add(*(Mul(g, *term) for term in total))

    # ----------------------------------------------------------- the tables

    def powers(self, weights: list[Expr]) -> None:
        """Add ∫ Σ weights[n] w^n dφ/Δ, n ≤ 2."""
        a, b, c, d = self.normal.moebius
        w0, w1, w2 = [*weights, S.Zero, S.Zero, S.Zero][:3]
        if d == 0:
            if w2 != 0:
                raise GivenUp("a square of w where w is linear in z")
            self.add(w0 + w1 * a / c, self._f())
            self._z(w1 * b / c)
            return
        at = b / d
        self.add(w0 + at * (w1 + w2 * at), self._f())
        slope = w1 + 2 * w2 * at
        if c == 0:
            if w2 != 0:
                raise GivenUp("a square of w with a pole at z = 0")
            self._inverse_z(slope * a / d)
            return
        jump = -self._determinant / (c * d)
        kappa = -d / c
        if w2 != 0:
            jump, kappa = self.name("c", jump), self.name("k", kappa)
            self._second(w2 * jump**2, kappa, slope * jump)
        elif slope != 0:
            self._first(slope * jump, kappa)

    def pole(self, residue: Expr, at: Expr, inside: bool | None = None) -> None:
        """Add ∫ residue/(w − at) dφ/Δ.

        ``inside`` says whether the pole lies where z takes it for a real φ.
        """
        a, b, c, d = self.normal.moebius
        alpha, beta = _tidy(a - at * c), _tidy(b - at * d)
        if beta == 0:
            self.add(residue * c / alpha, self._f())
            self._z(residue * d / alpha)
            return
        residue = self.name("c", residue)
        if alpha == 0:
            self.add(residue * d / beta, self._f())
            self._inverse_z(residue * (c / beta))
            return
        nu = -beta / alpha
        if self.normal.kind != "square":
            nu = self.name("k", _tidy(nu))
            beta = -nu * alpha
        self.add(residue * d / beta, self._f())
        self._first(residue * self._determinant / (alpha * beta), nu, inside)

    @cached_property
    def _determinant(self) -> Expr:
        a, b, c, d = self.normal.moebius
        return _tidy(b * c - a * d)

    def _f(self) -> Expr:
        return elliptic_f(self.normal.phi, self.normal.m, evaluate=False)

    def _e(self) -> Expr:
        return elliptic_e(self.normal.phi, self.normal.m, evaluate=False)

    def _z(self, k: Expr) -> None:
        """K ∫ z dφ/Δ."""
        if k == 0:
            return
        n = self.normal
        if n.kind == "square":
            self.add(k / n.m, self._f())
            self.add(-k / n.m, self._e())
        elif n.kind == "cosine":
            self.add(k / sqrt(n.m), sp.asin(sqrt(n.m) * n.sine / n.below))
        else:
            raise GivenUp("an integral of tan φ")

    def _inverse_z(self, k: Expr) -> None:
        """K ∫ dφ/(z Δ)."""
        n = self.normal
        if n.kind != "square":
            raise GivenUp("a pole at z = 0")
        self.add(k, self._f())
        self.add(-k, self._e())
        self.add(-k * n.cosine * n.delta / (n.sine * n.below))

    def _first(self, k: Expr, nu: Expr, inside: bool | None = None) -> None:
        """K ∫ dφ/((1 − νz)Δ)."""
        n = self.normal
        nu = _tidy(nu)
        if nu == 0:
            self.add(k, self._f())
        elif n.kind == "square":
            if inside:
                self._above(k, nu)
                return
            if _equal(nu, ONE):
                self.add(k, self._f())
                self.add(k / (1 - n.m) * n.sine * n.delta / (n.cosine * n.below))
                self.add(-k / (1 - n.m), self._e())
            elif _equal(nu, n.m):
                self.add(k / (1 - n.m), self._e())
                self.add(-k / (1 - n.m) * n.m * n.sine * n.cosine / (n.delta * n.below))
            else:
                self.add(k, elliptic_pi(self.name("n", nu), n.phi, n.m, evaluate=False))
        elif n.kind == "cosine":
            self._cosine(k, nu, inside)
        else:
            self._tangent(k, -nu)

    def _cosine(self, k: Expr, nu: Expr, inside: bool | None) -> None:
        n = self.normal
        if _equal(nu, ONE) or _equal(nu, -ONE):
            self.add(k, self._f())
            self.add(-k, self._e())
            half, delta = n.sine / (n.below + n.cosine), n.delta / n.below
            self.add(-k * delta / half if _equal(nu, ONE) else k * delta * half)
            return
        nu = self.name("k", nu)
        third = self.name("t", nu**2 / (nu**2 - 1))
        front = self.name("c", k * (1 - third))
        if n.passes if inside is None else inside:
            # both logarithms, of Π(third) and of its own, in one
            root = sqrt(third - n.m)
            self._reflected(front, third)
            up = third * n.below * (n.below - n.cosine / nu) - n.m * n.sine**2
            down = root * n.sine * n.delta
            self.add(front * nu / (2 * root), log(Abs((up + down) / (up - down), evaluate=False)))
        else:
            root = sqrt(n.m - third)
            self.add(front, elliptic_pi(third, n.phi, n.m, evaluate=False))
            self.add(front * nu / root, atan(root * n.sine / n.delta))

    def _tangent(self, k: Expr, nu: Expr) -> None:
        """K ∫ dφ/((1 + ν tan φ)Δ), the two logarithms in one."""
        n = self.normal
        nu = self.name("k", nu)
        third = 1 + nu**2
        self.add(k / third, self._f())
        self._reflected(k * nu**2 / third, third)
        root = sqrt(third * (third - n.m))
        up = third * n.below**2 - n.m * n.sine * (n.sine - nu * n.cosine)
        down = root * n.delta * n.below
        self.add(k * nu / (2 * root), log(Abs((up - down) / (up + down), evaluate=False)))

    def _reflected(self, k: Expr, third: Expr) -> None:
        """K Π(third, φ, m) for third > 1, but for its logarithm."""
        n = self.normal
        k = self.name("c", k)
        self.add(k, self._f())
        self.add(-k, elliptic_pi(n.m / third, n.phi, n.m, evaluate=False))

    def _above(self, k: Expr, third: Expr) -> None:
        """K Π(third, φ, m) for third > 1."""
        n = self.normal
        k = self.name("c", k)
        self._reflected(k, third)
        root = sqrt((third - 1) * (third - n.m) / third)
        up, down = n.cosine * n.delta, root * n.sine * n.below
        self.add(-k / (2 * root), log(Abs((up - down) / (up + down), evaluate=False)))

    def _second(self, k: Expr, nu: Expr, first: Expr) -> None:
        """∫ (K/(1 − νz)² + first/(1 − νz)) dφ/Δ."""
        n = self.normal
        if n.kind == "square":
            self._second_square(k, nu, first)
        elif n.kind == "cosine":
            third = self.name("t", nu**2 / (nu**2 - 1))
            front = self.name("c", k * third**2 / (nu**2 * (n.m - third)))
            self.add(front * nu * n.sine * n.delta / (n.below * (n.below - nu * n.cosine)))
            self._first(first - front * (2 * n.m - third) / third, nu)
            self.add(front * (n.m - third) / third, self._f())
            self.add(front, self._e())
        else:
            nu = -nu
            third = 1 + nu**2
            front = self.name("c", k * nu**2 / (third * (third - n.m)))
            ratio = (n.sine - nu * n.cosine) / (n.cosine + nu * n.sine)
            self.add(front * n.delta * ratio / n.below)
            self._first(first + front * (2 * third - n.m * (third + 1)) / nu**2, -nu)
            self.add(-front, self._e())
            self.add(front * (n.m - 1) / nu**2, self._f())

    def _second_square(self, k: Expr, nu: Expr, first: Expr) -> None:
        n = self.normal
        front = self.name("c", k / (2 * (nu - 1) * (n.m - nu)))
        self.add(front * nu, self._e())
        self.add(front * (n.m - nu), self._f())
        self._first(first + front * (2 * nu * n.m + 2 * nu - nu**2 - 3 * n.m), nu)
        ends = n.sine * n.cosine * n.delta / n.below
        self.add(-front * nu**2 * ends / (n.below**2 - nu * n.sine**2))


@lru_cache(maxsize=4096)
def _tidy(e: Expr) -> Expr:
    """A shorter way to write a constant, where one is found cheaply."""
    size = e.count_ops()
    if e.is_Atom or size > 2 * TIDIED:
        return e
    shorter = [sp.factor_terms(e)]
    if size < TIDIED:
        shorter.append(sp.factor(e) if _rational(e) else sp.expand(e))
    best = min(shorter, key=lambda x: x.count_ops())
    return best if best.count_ops() <= size else e


def _rational(e: Expr) -> bool:
    return not any(p.exp.q != 1 for p in e.atoms(sp.Pow) if p.exp.is_Rational)


def _equal(a: Expr, b: Expr) -> bool:
    """Whether two constants are the same number; seen at one point, proved by the check."""
    difference = a - b
    if difference == 0:
        return True
    if difference.count_ops() > 2 * TIDIED:
        return False
    if difference.is_number or not difference.free_symbols:
        return bool(abs(difference.evalf(30)) < 1e-25)
    for k in range(2):
        point = {
            s: sp.Rational(31 + 17 * j + 5 * k, 13 + 7 * j)
            for j, s in enumerate(sorted(difference.free_symbols, key=lambda s: s.name))
        }
        value = difference.xreplace(point).evalf(40)
        if not value.is_number or not abs(value) < 1e-25:
            return False
    return True
