"""What is proved of an answer, what is refuted, what is undecided, and by what."""

from hjsolve.certification.certify import certify

__all__ = ["certify"]
