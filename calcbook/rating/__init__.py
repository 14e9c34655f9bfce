"""What the installed area does with the duty: ledger of the area, parts of the unit, day one.

Takes a solved calculation and asks the same chain again, with other figures put in. May import: ``chain`` and
the rooms below it. Must never: print, read files, or hold an equation that is not in a card or in the chain.
"""
