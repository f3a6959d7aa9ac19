"""Functions of the wire contract that SymPy does not have.

They take the parameter m = k² throughout, as SymPy's own elliptic integrals
do.  Each has its derivative in every argument and its value to any precision
(through mpmath).  Derivatives: DLMF 22.13, 22.16.19 and A&S 16.16 with the
derivative by m from Lawden, Elliptic Functions and Applications, 3.10;
DLMF 19.18, 19.25; 23.3, 23.21 (all from memory, verified numerically).
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import mpmath  # type: ignore[import-untyped]
from sympy import Expr, Function, Integer, S, elliptic_e, sqrt
from sympy.core.function import ArgumentIndexError


class _Special(Function):
    """A function with a numerical value by mpmath.

    ``on_reals`` says whether it is real and finite wherever its arguments are real.
    """

    on_reals = False

    @staticmethod
    def number(*args: Any) -> Any:
        """The value at mpmath numbers."""
        raise NotImplementedError

    def _eval_evalf(self, prec: int) -> Expr | None:
        working = prec + 20
        try:
            with mpmath.workprec(working):
                arguments = [a._to_mpmath(working) for a in self.args]
                value = self.number(*arguments)
                if self.on_reals and not any(isinstance(a, mpmath.mpc) for a in arguments):
                    value = mpmath.re(value)  # m outside of (0, 1) is reached through complex m
        except (ValueError, TypeError, ZeroDivisionError, NotImplementedError):
            return None
        return Expr._from_mpmath(value, prec)

    def _eval_is_real(self) -> bool | None:
        return True if self.on_reals and all(a.is_real for a in self.args) else None

    def _eval_is_extended_real(self) -> bool | None:
        return self._eval_is_real()


class _Odd(_Special):
    """A function of (u, m) that is odd in u."""

    on_reals = True
    nargs = 2

    @classmethod
    def eval(cls, u: Expr, m: Expr) -> Expr | None:
        """0 at u = 0; the sign of u in front."""
        if u.is_zero:
            return S.Zero
        return -cls(-u, m) if u.could_extract_minus_sign() else None


class _Even(_Special):
    """A function of (u, m) that is even in u and 1 at 0."""

    on_reals = True
    nargs = 2

    @classmethod
    def eval(cls, u: Expr, m: Expr) -> Expr | None:
        """1 at u = 0; the sign of u away."""
        if u.is_zero:
            return S.One
        return cls(-u, m) if u.could_extract_minus_sign() else None


def _excess(u: Expr, m: Expr) -> Expr:
    """∂am/∂m divided by dn: ((1 − m)u − E(am, m) + m sn cn/dn)/(2m(1 − m)).

    For m > 1 only up to the first zero of dn: there am turns back and E(am, m)
    is no longer ∫dn² du.
    """
    s, c, d = jacobi_sn(u, m), jacobi_cn(u, m), jacobi_dn(u, m)
    above = (1 - m) * u - elliptic_e(jacobi_am(u, m), m) + m * s * c / d
    return above / (2 * m * (1 - m))


class jacobi_sn(_Odd):  # noqa: N801 - the contract's name
    """Jacobi's sn(u, m), DLMF 22.2."""

    def fdiff(self, argindex: int = 1) -> Expr:
        """The partial derivative by u (1) or m (2)."""
        u, m = self.args
        slope = jacobi_cn(u, m) * jacobi_dn(u, m)
        return _by(argindex, slope, lambda: slope * _excess(u, m), self)

    @staticmethod
    def number(*args: Any) -> Any:
        """The value at mpmath numbers."""
        return mpmath.ellipfun("sn", args[0], m=args[1])


class jacobi_cn(_Even):  # noqa: N801
    """Jacobi's cn(u, m), DLMF 22.2."""

    def fdiff(self, argindex: int = 1) -> Expr:
        """The partial derivative by u (1) or m (2)."""
        u, m = self.args
        slope = -jacobi_sn(u, m) * jacobi_dn(u, m)
        return _by(argindex, slope, lambda: slope * _excess(u, m), self)

    @staticmethod
    def number(*args: Any) -> Any:
        """The value at mpmath numbers."""
        return mpmath.ellipfun("cn", args[0], m=args[1])


class jacobi_dn(_Even):  # noqa: N801
    """Jacobi's dn(u, m), DLMF 22.2."""

    def fdiff(self, argindex: int = 1) -> Expr:
        """The partial derivative by u (1) or m (2)."""
        u, m = self.args
        s, c, d = jacobi_sn(u, m), jacobi_cn(u, m), jacobi_dn(u, m)
        slope = -m * s * c
        return _by(argindex, slope, lambda: slope * _excess(u, m) - s**2 / (2 * d), self)

    @staticmethod
    def number(*args: Any) -> Any:
        """The value at mpmath numbers."""
        return mpmath.ellipfun("dn", args[0], m=args[1])


class jacobi_am(_Odd):  # noqa: N801
    """Jacobi's amplitude am(u, m), DLMF 22.16."""

    def fdiff(self, argindex: int = 1) -> Expr:
        """The partial derivative by u (1) or m (2)."""
        u, m = self.args
        d = jacobi_dn(u, m)
        return _by(argindex, d, lambda: d * _excess(u, m), self)

    @staticmethod
    def number(*args: Any) -> Any:
        """The value at real mpmath numbers; continuous in u for m < 1."""
        u, m = args
        if mpmath.im(u) or mpmath.im(m):
            raise ValueError("the amplitude of a complex argument has branches")
        s, c = (mpmath.ellipfun(name, u, m=m) for name in ("sn", "cn"))
        principal = mpmath.atan2(mpmath.re(s), mpmath.re(c))
        if m >= 1:
            return principal
        # am − πu/(2K) has period 2K and stays within a quarter turn
        mean = mpmath.pi * u / (2 * mpmath.ellipk(m))
        turn = 2 * mpmath.pi
        return principal + turn * mpmath.nint((mean - principal) / turn)


def _by(argindex: int, first: Expr, second: Callable[[], Expr], function: Function) -> Expr:
    if argindex == 1:
        return first
    if argindex == 2:
        return second()
    raise ArgumentIndexError(function, argindex)


class carlson_rf(_Special):  # noqa: N801
    """Carlson's R_F(x, y, z), DLMF 19.16.1."""

    nargs = 3

    def fdiff(self, argindex: int = 1) -> Expr:
        """∂R_F/∂x = −R_D(y, z, x)/6, and likewise by y and z."""
        if argindex not in (1, 2, 3):
            raise ArgumentIndexError(self, argindex)
        turned = [self.args[(argindex + k) % 3] for k in range(3)]
        return -carlson_rd(*turned) / 6

    @staticmethod
    def number(*args: Any) -> Any:
        """The value at mpmath numbers."""
        return mpmath.elliprf(*args)


class carlson_rc(_Special):  # noqa: N801
    """Carlson's R_C(x, y), DLMF 19.2.17; for y < 0 its principal value."""

    nargs = 2

    def fdiff(self, argindex: int = 1) -> Expr:
        """From the algebraic differential equations DLMF 19.18 of R_C."""
        x, y = self.args
        if argindex == 1:
            return (self - 1 / sqrt(x)) / (2 * (y - x))
        if argindex == 2:
            return (sqrt(x) / y - self) / (2 * (y - x))
        raise ArgumentIndexError(self, argindex)

    @staticmethod
    def number(*args: Any) -> Any:
        """The value at mpmath numbers."""
        value = mpmath.elliprc(*args)
        return value if any(isinstance(a, mpmath.mpc) for a in args) else mpmath.re(value)


class carlson_rd(_Special):  # noqa: N801
    """Carlson's R_D(x, y, z), DLMF 19.16.5."""

    nargs = 3

    def fdiff(self, argindex: int = 1) -> Expr:
        """∂R_D/∂x = (R_D(x, y, z) − R_D(y, z, x))/(2(z − x)); by z from homogeneity."""
        x, y, z = self.args
        if argindex in (1, 2):
            a, b = (x, y) if argindex == 1 else (y, x)
            return (self - carlson_rd(b, z, a)) / (2 * (z - a))
        if argindex == 3:
            # Euler: x∂_x + y∂_y + z∂_z = −3/2
            return -(Integer(3) / 2 * self + x * self.fdiff(1) + y * self.fdiff(2)) / z
        raise ArgumentIndexError(self, argindex)

    @staticmethod
    def number(*args: Any) -> Any:
        """The value at mpmath numbers."""
        return mpmath.elliprd(*args)


class carlson_rj(_Special):  # noqa: N801
    """Carlson's R_J(x, y, z, p), DLMF 19.16.2; for p < 0 its principal value."""

    nargs = 4

    def fdiff(self, argindex: int = 1) -> Expr:
        """∂R_J/∂x = (R_J − R_D(y, z, x))/(2(p − x)); by p from homogeneity."""
        p = self.args[3]
        if argindex in (1, 2, 3):
            at = self.args[argindex - 1]
            y, z = (a for k, a in enumerate(self.args[:3]) if k != argindex - 1)
            return (self - carlson_rd(y, z, at)) / (2 * (p - at))
        if argindex == 4:
            total = Integer(3) / 2 * self
            for k in (1, 2, 3):
                total += self.args[k - 1] * self.fdiff(k)
            return -total / p
        raise ArgumentIndexError(self, argindex)

    @staticmethod
    def number(*args: Any) -> Any:
        """The value at mpmath numbers."""
        value = mpmath.elliprj(*args)
        # the principal value for p < 0 is the real part, DLMF 19.20.14
        return value if any(isinstance(a, mpmath.mpc) for a in args) else mpmath.re(value)


class weierstrass_p(_Special):  # noqa: N801
    """Weierstrass's ℘(u; g2, g3), DLMF 23.2.

    Its derivative by u is ±√(4℘³ − g2 ℘ − g3) and by the invariants needs ζ, so
    that both stay formal.
    """

    nargs = 3

    @classmethod
    def eval(cls, u: Expr, g2: Expr, g3: Expr) -> Expr | None:
        """Even in u."""
        return cls(-u, g2, g3) if u.could_extract_minus_sign() else None

    @staticmethod
    def number(*args: Any) -> Any:
        """e_3 + (e_1 − e_3)/sn²(u√(e_1 − e_3), m), DLMF 23.6.24."""
        u, g2, g3 = args
        e1, e2, e3 = mpmath.polyroots([4, 0, -g2, -g3], maxsteps=200, extraprec=200)
        m = (e2 - e3) / (e1 - e3)
        sn = mpmath.ellipfun("sn", u * mpmath.sqrt(e1 - e3), m=m)
        value = e3 + (e1 - e3) / sn**2
        real = not any(mpmath.im(a) for a in args)
        return mpmath.re(value) if real else value


JACOBI = (jacobi_sn, jacobi_cn, jacobi_dn, jacobi_am)
CARLSON = (carlson_rf, carlson_rc, carlson_rd, carlson_rj)
