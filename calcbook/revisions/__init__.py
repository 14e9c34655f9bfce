"""The life of a calculation: sign-offs, issued copies, the next revision, and what moved between two revisions.

May import: ``interface``, ``record``, ``chain``, ``calcfile``, ``library``, ``formulas``, ``quantities``, ``documents``,
``files``, ``faults`` and the backend version of ``properties``. Must never: import ``book`` or ``commands``, print, or
let the clock reach a document: today's date is only asked to refuse a date that lies in the future.
"""
