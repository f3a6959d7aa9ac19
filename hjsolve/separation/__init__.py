"""Does H separate, and if so into which equations?  ``detect``, then ``separate``."""

from hjsolve.separation.criterion import detect
from hjsolve.separation.separate import separate

__all__ = ["detect", "separate"]
