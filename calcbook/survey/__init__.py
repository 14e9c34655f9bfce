"""Plant data: the fouling resistance row by row through the calculation's own chain, and what it grows like.

``rows`` turns the texts of the history into arrays, ``rules`` rejects and counts, ``resistance`` solves every
row in one call, ``growth`` and ``fitting`` find the parameters of a growth model, ``bounds`` says how sure
they are, ``surveying`` puts it together. May import: ``uncertainty``, ``chain`` and
every room below it. Must never: read a file, print, know how a record looks, drop a row uncounted.
"""
