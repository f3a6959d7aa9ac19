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
from typing import Literal

import sympy as sp
from sympy import Abs, Add, Expr, Mul, S, atan, elliptic_e, elliptic_f, elliptic_pi, log, sqrt

from hjsolve.quadrature.ratios import GivenUp

ONE = S.One

TIDIED = 40
"""Operations of a coefficient above which no shorter way to write it is looked for."""


@dataclass(frozen=True)
class Normal:
    """φ(u), m, g and the meaning of z.

    ``sine``, ``cosine``, ``delta`` are sin φ, cos φ, Δ as algebraic functions of
    u.  ``moebius`` is (A, B, C, D).  ``passes`` says whether φ may lie on both
    sides of the mirror image of a pole, where Π(n) with n > 1 is not used.
    """

    phi: Expr
    m: Expr
    weight: Expr
    kind: Literal["square", "cosine", "tangent"]
    moebius: tuple[Expr, Expr, Expr, Expr]
    sine: Expr
    cosine: Expr
    delta: Expr
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
        """The sum times g."""
        g = self.normal.weight
        total = []
        for function, coefficients in self.terms.items():
            c = _tidy(Add(*coefficients))
            total.append(Mul(g, c, function))
        return Add(*total)

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
        self.add(w0 + w1 * at + w2 * at**2, self._f())
        slope = w1 + 2 * w2 * at
        if c == 0:
            if w2 != 0:
                raise GivenUp("a square of w with a pole at z = 0")
            self._inverse_z(slope * a / d)
            return
        jump = (a * d - b * c) / (c * d)
        kappa = -d / c
        if slope != 0 or w2 != 0:
            self._first(slope * jump, kappa)
        if w2 != 0:
            self._second(w2 * jump**2, kappa)

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
        self.add(residue * d / beta, self._f())
        det = b * c - a * d
        if alpha == 0:
            self._inverse_z(residue * (c / beta))
            return
        self._first(residue * det / (alpha * beta), -beta / alpha, inside)

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
            self.add(k / sqrt(n.m), sp.asin(sqrt(n.m) * n.sine))
        else:
            raise GivenUp("an integral of tan φ")

    def _inverse_z(self, k: Expr) -> None:
        """K ∫ dφ/(z Δ)."""
        n = self.normal
        if n.kind != "square":
            raise GivenUp("a pole at z = 0")
        self.add(k, self._f())
        self.add(-k, self._e())
        self.add(-k * n.cosine * n.delta / n.sine)

    def _first(self, k: Expr, nu: Expr, inside: bool | None = None) -> None:
        """K ∫ dφ/((1 − νz)Δ)."""
        n = self.normal
        nu = _tidy(nu)
        if nu == 0:
            self.add(k, self._f())
        elif n.kind == "square":
            if inside:
                self._third(k, nu, True)
                return
            if _equal(nu, ONE):
                self.add(k, self._f())
                self.add(k / (1 - n.m) * n.sine * n.delta / n.cosine)
                self.add(-k / (1 - n.m), self._e())
            elif _equal(nu, n.m):
                self.add(k / (1 - n.m), self._e())
                self.add(-k / (1 - n.m) * n.m * n.sine * n.cosine / n.delta)
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
            half = n.sine / (1 + n.cosine)
            self.add(-k * n.delta / half if _equal(nu, ONE) else k * n.delta * half)
            return
        nu = self.name("k", nu)
        third = nu**2 / (nu**2 - 1)
        front = k / (1 - nu**2)
        if inside is None:
            inside = n.passes
        self._third(front, third, inside)
        if inside:
            root = sqrt(nu**2 / (nu**2 - 1) - n.m)
            ratio = (n.delta + root * n.sine) / (n.delta - root * n.sine)
            self.add(front * nu / (2 * root), log(Abs(ratio, evaluate=False)))
        else:
            root = sqrt(n.m + nu**2 / (1 - nu**2))
            self.add(front * nu / root, atan(root * n.sine / n.delta))

    def _tangent(self, k: Expr, nu: Expr) -> None:
        """K ∫ dφ/((1 + ν tan φ)Δ)."""
        n = self.normal
        nu = self.name("k", nu)
        third = 1 + nu**2
        self.add(k / third, self._f())
        self._third(k * nu**2 / third, third, True)
        up, down = sqrt(third) * n.delta, sqrt(third - n.m)
        self.add(
            k * nu / (2 * sqrt(third * (third - n.m))),
            log(Abs((up - down) / (up + down), evaluate=False)),
        )

    def _third(self, k: Expr, third: Expr, above: bool) -> None:
        """K Π(third, φ, m); ``above`` says whether third > 1."""
        n = self.normal
        if not above:
            self.add(k, elliptic_pi(third, n.phi, n.m, evaluate=False))
            return
        self.add(k, self._f())
        self.add(-k, elliptic_pi(n.m / third, n.phi, n.m, evaluate=False))
        root = sqrt((third - 1) * (third - n.m) / third)
        up, down = n.cosine * n.delta, root * n.sine
        self.add(-k / (2 * root), log(Abs((up - down) / (up + down), evaluate=False)))

    def _second(self, k: Expr, nu: Expr) -> None:
        """K ∫ dφ/((1 − νz)² Δ)."""
        n = self.normal
        nu = self.name("n" if n.kind == "square" else "k", nu)
        if n.kind == "square":
            self._second_square(k, nu)
        elif n.kind == "cosine":
            x0 = (nu**2 - 1) * (nu**2 * n.m - nu**2 - n.m) / nu**3
            x1 = (2 * nu**2 * n.m - nu**2 - 2 * n.m) / nu**3
            self.add(k / x0 * n.sine * n.delta / (1 - nu * n.cosine))
            self._first(-k * x1 / x0, nu)
            self.add(-k / x0 * (n.m + nu**2 * (1 - n.m)) / nu**3, self._f())
            self.add(k / (x0 * nu), self._e())
        else:
            t, rest = -nu, 1 - n.m
            x0 = -(rest + t**2) * (t**2 + 1) / t**3
            x1 = (rest * t**2 + 2 * rest + t**2) / t**3
            ratio = (t * n.cosine - n.sine) / (t * (n.cosine + t * n.sine))
            self.add(k / x0 * n.delta * ratio)
            self._first(-k * x1 / x0, nu)
            self.add(k / (x0 * t), self._e())
            self.add(k * rest / (x0 * t**3), self._f())

    def _second_square(self, k: Expr, nu: Expr) -> None:
        n = self.normal
        front = k / (2 * (nu - 1) * (n.m - nu))
        self.add(front * nu, self._e())
        self.add(front * (n.m - nu), self._f())
        self._first(front * (2 * nu * n.m + 2 * nu - nu**2 - 3 * n.m), nu)
        self.add(-front * nu**2 * n.sine * n.cosine * n.delta / (1 - nu * n.sine**2))


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
