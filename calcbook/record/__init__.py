"""The record room: a solved calculation to blocks, blocks to Markdown, and the results file.

It prints what the chain holds: it formats, sorts and chooses digits. May import: ``chain``, ``calcfile``,
``library``, ``formulas``, ``quantities``, ``fault_codes``, and of ``properties`` the backend version and the
names of fluids. Must never: compute a physical figure, read a file, look at a clock, or turn blocks into
Markdown outside ``markdown.py``.
"""

from calcbook.record.blocks import Block, Bullets, Code, Heading, Paragraph, Quote, Table
from calcbook.record.digest import Digest, digest_of
from calcbook.record.markdown import markdown
from calcbook.record.record import record_blocks, record_text
from calcbook.record.results import results_data, results_text
from calcbook.record.software import Software, software_of

__all__ = [
    "Block",
    "Bullets",
    "Code",
    "Digest",
    "Heading",
    "Paragraph",
    "Quote",
    "Software",
    "Table",
    "digest_of",
    "markdown",
    "record_blocks",
    "record_text",
    "results_data",
    "results_text",
    "software_of",
]
