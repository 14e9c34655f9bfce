"""The revisions room: what changed between two revisions and what each change did; sign-off and issued
copies.

May import: ``interface``, ``record``, ``chain``, ``calcfile``, ``library``, ``formulas``, ``quantities``,
``documents``, ``files``, ``faults`` and the backend version of ``properties``. Must never: import ``book`` or
``commands``, make Markdown, print, or read a clock elsewhere than for the date of a sign-off.
"""
