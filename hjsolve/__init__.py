"""Hamilton–Jacobi separation: verdict, complete integral, motion, certificate."""

__version__ = "0.1.0"
