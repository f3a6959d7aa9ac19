"""Canonical transformations: from a generating function to the map, and back."""

from hjsolve.transformation.analyse import transform
from hjsolve.transformation.document import transformation_document, transformation_lines
from hjsolve.transformation.request import read_request

__all__ = ["read_request", "transform", "transformation_document", "transformation_lines"]
