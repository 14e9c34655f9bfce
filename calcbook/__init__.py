"""calcbook: a runner for controlled calculations of overall heat-transfer coefficients.

The public interface is small and loaded when it is used, so that ``import calcbook`` stays quick:

``read(path)``      calculation file to ``Calculation`` (raises ``calcbook.faults.Faults``)
``solve(calc)``     ``Calculation`` to ``Solved`` (chain and solution of every case)
``record_text(s)``  ``Solved`` to the Markdown text of its record

Data takes one way, ``text, Calculation, Chain, Solution, Record``; none reaches back.
"""

from typing import TYPE_CHECKING, Any

__version__ = "0.1.0"

if TYPE_CHECKING:
    from calcbook.interface import read, record_text, solve

__all__ = ["__version__", "read", "record_text", "solve"]


def __getattr__(name: str) -> Any:
    if name in ("read", "solve", "record_text"):
        from calcbook import interface

        return getattr(interface, name)
    raise AttributeError(f"module 'calcbook' has no attribute {name!r}")
