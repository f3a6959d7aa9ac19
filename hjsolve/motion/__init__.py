"""The Jacobi relations ∂S/∂α = β, and q(t), p(t) where they invert."""

from hjsolve.motion.common import by_parameter
from hjsolve.motion.equations import set_in_motion

__all__ = ["by_parameter", "set_in_motion"]
