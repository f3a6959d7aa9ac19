"""Does H separate, and if so into which equations?  ``detect``, then ``separate``."""

from hjsolve.separation.criterion import detect

__all__ = ["detect"]
