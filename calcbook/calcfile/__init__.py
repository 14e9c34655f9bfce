"""The calculation file: text to ``Calculation``, with positions and faults.

What the file says stays what it says here; what it means (units of a field, names, methods, order) is
the business of ``chain``. May import: ``documents``, ``formulas``, ``quantities``, ``faults``. Must
never: load a card, ask for a property, compute a result.
"""

from calcbook.calcfile.calculation import Calculation, Settings
from calcbook.calcfile.reading import read_calculation, read_document
from calcbook.calcfile.settings import BOOK_FILE, read_settings

__all__ = ["BOOK_FILE", "Calculation", "Settings", "read_calculation", "read_document", "read_settings"]
