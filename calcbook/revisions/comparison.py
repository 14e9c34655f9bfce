"""The comparison of two revisions, in front of its parts: compare, then print as a page, in short, or as
data."""

from calcbook.revisions.comparing import Comparison, compare
from calcbook.revisions.comparison_page import comparison_blocks, comparison_data, short_blocks

__all__ = ["Comparison", "compare", "comparison_blocks", "comparison_data", "short_blocks"]
