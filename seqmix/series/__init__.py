"""Reading logs: from a file, a pipe or Python values to rows of codes and times."""

from .alphabet import Alphabet
from .clock import Clock
from .log import Log
from .opening import open_log
from .rows import CHUNK, MISSING, Rows
from .series import Series, read

__all__ = ["CHUNK", "MISSING", "Alphabet", "Clock", "Log", "Rows", "Series", "open_log", "read"]
