"""Properties of fluids: pure fluids, mixtures, humid air, tables, stated constants, rules over a relative density.

A fluid is made by ``pure``, ``mixture``, ``humid_air``, ``tabulated``, ``related`` or ``constant``;
``.at(pressure, phase)`` gives the object that answers. Backend fluids are answered from Chebyshev series that
were compared with the backend when made, and are kept in the user's cache folder: a repeat run gets the same
bits and does not import the backend.

May import: the standard library, numpy, platformdirs, CoolProp (inside functions) and ``calcbook.faults``.
Must never: know a unit, read a calculation file, or let another room import CoolProp.
"""

from calcbook.properties.backed import mixture, pure
from calcbook.properties.backend import PROPERTIES, SATURATION_PROPERTIES, backend_version
from calcbook.properties.curves import Asked
from calcbook.properties.faults import PropertyFault
from calcbook.properties.findings import Finding
from calcbook.properties.fluid import Fluid, FluidAtPressure
from calcbook.properties.humid import SATURATION_FRACTION, humid_air
from calcbook.properties.names import fluid_names, mixture_names
from calcbook.properties.several import rows_of_several
from calcbook.properties.stated import (
    LAW_REACH,
    Relation,
    ViscosityLaw,
    astm_d341,
    constant,
    related,
    tabulated,
)
from calcbook.properties.store import clear_memory

__all__ = [
    "LAW_REACH",
    "PROPERTIES",
    "SATURATION_FRACTION",
    "SATURATION_PROPERTIES",
    "Asked",
    "Finding",
    "Fluid",
    "FluidAtPressure",
    "PropertyFault",
    "Relation",
    "ViscosityLaw",
    "astm_d341",
    "backend_version",
    "clear_memory",
    "constant",
    "fluid_names",
    "humid_air",
    "mixture",
    "mixture_names",
    "pure",
    "related",
    "rows_of_several",
    "tabulated",
]
