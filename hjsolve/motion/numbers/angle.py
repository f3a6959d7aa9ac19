"""The variable in which a coordinate's equation has no singularity at its turning points.

libration   q = mid − amp·cos φ, so that (q − a)(b − q) = amp² sin² φ and p dq is smooth and
            2π-periodic; φ in (0, π) is the branch σ = +1 with q rising, the mirrored half
            σ = −1.  For a radicand under a fourth root q′ = (3/2)·amp·sin³ φ.
rotation    φ = q.
unbounded   one turning point: q = a ± s(cosh u − 1); none: q = q₀ + s·sinh u.
separatrix  between two double zeros q = mid + half·tanh u, between a turning point and a
            double zero q = a + s·tanh² u, from a double zero to infinity q = b + s·eᵘ; towards a
            double zero all relations grow evenly with u.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Literal

from flint import arb, ctx

from hjsolve.motion.numbers.start import Coordinate
from hjsolve.motion.numbers.tape import cannot
from hjsolve.motion.numbers.turning import Region

Shape = Literal["circle", "turn", "well", "line", "front", "bank", "ramp"]

ASYMPTOTE = 24
"""The u at which a coordinate on a separatrix is at its limit to the last bit of a double."""


@dataclass(frozen=True, slots=True)
class Angle:
    """A coordinate as a smooth function of its angle variable.

    ``shape``: circle (libration), turn (rotation), well (one turning point), line
    (none), front, bank and ramp (separatrix).  ``centre`` and ``size`` are mid and
    amp, or a and ±s, or q₀ and s, and so on as above.
    ``start`` is the value at the start state.
    """

    shape: Shape
    centre: Any
    size: Any
    start: Any
    order: int = 2

    @property
    def mirrored(self) -> bool:
        """Whether the motion at −φ is that at φ with the other branch."""
        return self.shape in ("circle", "well", "bank")

    def at(self, phi: Any) -> tuple[Any, Any]:
        """(q, dq/dφ) at a ball, real or complex."""
        if self.shape == "turn":
            return phi, arb(1)
        if self.shape == "circle":
            s, c = phi.sin(), phi.cos()
            if self.order == 2:
                return self.centre - self.size * c, self.size * s
            return self.centre - self.size * c * (3 - c * c) / 2, self.size * s * s * s * 3 / 2
        e = phi.exp()
        if self.shape == "ramp":
            return self.centre + self.size * e, self.size * e
        if self.shape in ("front", "bank"):
            tanh = (e - 1 / e) / (e + 1 / e)
            slope = 4 / (e + 1 / e) ** 2
            if self.shape == "front":
                return self.centre + self.size * tanh, self.size * slope
            return self.centre + self.size * tanh * tanh, 2 * self.size * tanh * slope
        sinh, cosh = (e - 1 / e) / 2, (e + 1 / e) / 2
        if self.shape == "well":
            half = (phi / 2).exp()
            small = (half - 1 / half) / 2
            return self.centre + 2 * self.size * small * small, self.size * sinh
        return self.centre + self.size * sinh, self.size * cosh


def angle_of(c: Coordinate, region: Region) -> Angle:
    """The angle variable of a coordinate in its interval.

    Raises:
        InputError: there is none for this kind of motion.
    """
    order = c.compiled.order
    if region.kind == "rotation":
        turn = 2 * arb.pi()
        within = c.q - turn * (c.q.mid() / turn.mid()).floor().mid()
        return Angle("turn", arb(0), arb(1), within)
    if region.kind == "libration":
        if order not in (2, 4):
            raise cannot(f"the momentum of {c.name} is a root of order {order}")
        a, b = region.lower.at, region.upper.at
        middle, size = (a + b) / 2, (b - a) / 2
        return Angle("circle", middle, size, _phase(c, middle, size, order), order)
    if region.kind == "unbounded" and order == 2:
        return _unbounded(c, region)
    if region.kind == "separatrix" and order == 2:
        return _separatrix(c, region)
    raise cannot(f"{c.name} has no angle variable in a motion of the kind {region.kind}")


def _phase(c: Coordinate, middle: Any, size: Any, order: int) -> Any:
    """The angle of the start."""
    cosine = (middle - c.q) / size
    if c.sign == 0:
        return arb(0) if cosine > 0 else arb.pi()
    if order == 4:
        cosine = _quartic_cosine(cosine)
    if not (cosine > -1 and cosine < 1):
        cosine = arb(cosine.mid())
        cosine = arb.max(arb.min(cosine, arb(1)), arb(-1))
    phase = cosine.acos()
    return phase if c.sign > 0 else -phase


def _quartic_cosine(value: Any) -> Any:
    """The c in [−1, 1] with c(3 − c²)/2 = value."""
    x = arb(float(value.mid()))
    third = (arb(float(value.mid())).asin() / 3).sin()
    x = 2 * third  # c = 2 sin(asin(v)/3), from sin 3a = 3 sin a − 4 sin³ a
    for _ in range(ctx.prec.bit_length()):
        slope = (3 - 3 * x * x) / 2
        if slope.contains(0):
            break
        x = (x - (x * (3 - x * x) / 2 - value) / slope).mid()
    return x


def _unbounded(c: Coordinate, region: Region) -> Angle:
    lower, upper = region.lower, region.upper
    scale = arb(1)
    if lower.kind in ("root", "pole"):
        scale = _scale(c, lower.at)
        return _well(c, lower.at, scale)
    if upper.kind in ("root", "pole"):
        scale = _scale(c, upper.at)
        return _well(c, upper.at, -scale)
    return Angle("line", c.q, scale, arb(0))


def _well(c: Coordinate, a: Any, size: Any) -> Angle:
    ratio = (c.q - a) / (2 * size)  # sinh²(u/2)
    if c.sign == 0:
        return Angle("well", a, size, arb(0))
    if not ratio > 0:
        raise cannot(f"the start is too close to a turning point of {c.name} to tell")
    u = 2 * ratio.sqrt().asinh()
    return Angle("well", a, size, u if c.sign > 0 else -u)


def _separatrix(c: Coordinate, region: Region) -> Angle:
    lower, upper = region.lower, region.upper
    if lower.kind == upper.kind == "double":
        middle, half = (lower.at + upper.at) / 2, (upper.at - lower.at) / 2
        return Angle("front", middle, half, ((c.q - middle) / half).atanh())
    limit, other = (lower.at, upper) if lower.kind == "double" else (upper.at, lower)
    if other.kind in ("root", "pole"):
        size = limit - other.at
        if c.sign == 0:
            return Angle("bank", other.at, size, arb(0))
        u = ((c.q - other.at) / size).sqrt().atanh()
        return Angle("bank", other.at, size, u if c.sign > 0 else -u)
    if other.kind == "infinity":
        return Angle("ramp", limit, c.q - limit, arb(0))
    raise cannot(f"{c.name} moves between a separatrix and the end of its domain")


def _scale(c: Coordinate, a: Any) -> Any:
    """A length over which the radicand changes near its zero."""
    slope = c.side(arb(a.mid()))[1]
    curvature = c.second.balls(arb(a.mid()))[1]
    length = abs(slope) / (abs(curvature) + abs(slope) / (1 + abs(a)))
    return arb(float(length.mid())) if length.is_finite() and length > 0 else arb(1)
