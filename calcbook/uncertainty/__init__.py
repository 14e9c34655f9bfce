"""How sure a result is, and what would change it: budget, samples, sweeps, distances to a flip.

May import: ``chain`` and every room below it. Must never: print, format, read YAML, know a page.
"""
