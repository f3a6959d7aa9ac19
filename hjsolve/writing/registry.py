"""The notations a formula can be written in, in order."""

from __future__ import annotations

from hjsolve.writing.infix import write_infix
from hjsolve.writing.mathml import write_mathml
from hjsolve.writing.notations import Notation
from hjsolve.writing.tex import write_latex

WRITERS: tuple[Notation, ...] = (
    Notation(
        name="infix",
        source="the request grammar of this project's wire contract",
        examples=(
            ("x^-2/2", "1/(2*x**2)"),
            ("sqrt(E) - I*beta", "sqrt(E) - I*beta"),
            ("x^(3/2)*exp(1)", "exp(1)*x**(3/2)"),
        ),
        write=write_infix,
    ),
    Notation(
        name="latex",
        source="LaTeX2e with amsmath",
        examples=(
            ("p_theta", r"p_{\theta}"),
            ("alpha_1", r"\alpha_{1}"),
            ("asin(x)", r"\arcsin{\left(x \right)}"),
            ("jacobi_sn(u, m)", r"\operatorname{sn}\left(u \mid m\right)"),
        ),
        write=write_latex,
    ),
    Notation(
        name="mathml",
        source="presentation MathML, W3C MathML 3.0 chapter 3",
        examples=(
            (
                "p_theta",
                '<math xmlns="http://www.w3.org/1998/Math/MathML"><msub><mi>p</mi>'
                "<mrow><mi>&#952;</mi></mrow></msub></math>",
            ),
        ),
        write=write_mathml,
    ),
)


def writer(name: str) -> Notation:
    """The entry of that name.

    Raises:
        KeyError: there is none.
    """
    for entry in WRITERS:
        if entry.name == name:
            return entry
    raise KeyError(name)
