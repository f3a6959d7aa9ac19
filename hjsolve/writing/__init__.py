"""Records -> notations: JSON documents, infix, LaTeX, MathML, terminal text."""

from hjsolve.writing.article import as_latex
from hjsolve.writing.formula import formula_object
from hjsolve.writing.notations import Notation
from hjsolve.writing.person import for_person
from hjsolve.writing.problem import content_id, problem_document
from hjsolve.writing.registry import WRITERS
from hjsolve.writing.solution import solution_document

__all__ = [
    "WRITERS",
    "Notation",
    "as_latex",
    "content_id",
    "for_person",
    "formula_object",
    "problem_document",
    "solution_document",
]
