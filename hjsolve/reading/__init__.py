"""Text -> ``Hamiltonian``: the project's own grammar, never eval."""

from hjsolve.reading.formula import read_formula
from hjsolve.reading.limits import LIMITS, Limits
from hjsolve.reading.problem import read_problem

__all__ = ["LIMITS", "Limits", "read_formula", "read_problem"]
