"""The motion in numbers: turning points, actions, frequencies, states at any times."""

from hjsolve.motion.numbers.actions import find_actions
from hjsolve.motion.numbers.trajectory import find_trajectory

__all__ = ["find_actions", "find_trajectory"]
