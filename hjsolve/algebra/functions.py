"""Functions of the wire contract that SymPy does not have.

They take the parameter m = k² throughout, as SymPy's own elliptic integrals
do.  They are plain symbols with derivatives left formal; a room that can do
more with one of them (closed forms, ball evaluation) says so itself.
"""

from __future__ import annotations

from sympy import Function


class jacobi_sn(Function):  # noqa: N801 - the contract's name
    """Jacobi's sn(u, m), DLMF 22.2."""

    nargs = 2


class jacobi_cn(Function):  # noqa: N801
    """Jacobi's cn(u, m), DLMF 22.2."""

    nargs = 2


class jacobi_dn(Function):  # noqa: N801
    """Jacobi's dn(u, m), DLMF 22.2."""

    nargs = 2


class jacobi_am(Function):  # noqa: N801
    """Jacobi's amplitude am(u, m), DLMF 22.16."""

    nargs = 2


class carlson_rf(Function):  # noqa: N801
    """Carlson's R_F(x, y, z), DLMF 19.16.1."""

    nargs = 3


class carlson_rc(Function):  # noqa: N801
    """Carlson's R_C(x, y), DLMF 19.2.17."""

    nargs = 2


class carlson_rd(Function):  # noqa: N801
    """Carlson's R_D(x, y, z), DLMF 19.16.5."""

    nargs = 3


class carlson_rj(Function):  # noqa: N801
    """Carlson's R_J(x, y, z, p), DLMF 19.16.2."""

    nargs = 4


class weierstrass_p(Function):  # noqa: N801
    """Weierstrass's ℘(u; g2, g3), DLMF 23.2."""

    nargs = 3
