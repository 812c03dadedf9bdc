"""The judge room: original and variant, read from their text alone, run on numbers that carry their history."""

from .examine import Examiner, Finding, Task
from .hints import task_of
from .kinds import TooLong, Undefined, Unsupported

__all__ = ["Examiner", "Finding", "Task", "TooLong", "Undefined", "Unsupported", "task_of"]
