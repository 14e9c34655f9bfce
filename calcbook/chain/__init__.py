"""The engine: a calculation and its cards to ordered steps, and the steps to figures on arrays.

``build`` resolves names, units, methods and order; ``solve`` closes all temperature drops together for
one condition; ``analyse`` evaluates every case with its checks, criteria and open items. May import:
``calcfile``, ``library``, ``properties``, ``formulas``, ``quantities``, ``faults``. Must never: read YAML,
print, or know how a record looks.
"""
