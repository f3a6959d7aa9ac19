"""Coordinate systems: the catalogue, the search, and carrying a Hamiltonian into one."""

from hjsolve.charts.naming import named
from hjsolve.charts.registry import CHARTS
from hjsolve.charts.search.decide import search
from hjsolve.charts.search.special import special
from hjsolve.charts.transform import in_chart, upright

__all__ = ["CHARTS", "in_chart", "named", "search", "special", "upright"]
