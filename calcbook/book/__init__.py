"""The book: many calculations found, run (in parallel where there are many) and written whole.

May import: every room below it. Must never: know how a record looks, or compute.
"""

from calcbook.book.finding import Found, find_calculations
from calcbook.book.running import Outcome, run_all

__all__ = ["Found", "Outcome", "find_calculations", "run_all"]
