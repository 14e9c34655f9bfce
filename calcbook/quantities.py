"""Quantities: text to number with unit, and back. The one unit registry lives here.

``read_quantity`` reads one text as a quantity of a known kind, ``read_any`` as whatever its unit says,
``read_tolerance`` as a half-width. What cannot be taken raises ``QuantityFault`` with the columns of the
text concerned. Numbers are carried as exact fractions and rounded once, to the SI value, so that the same
case typed in SI and in US customary units gives the same float.

The units are those of ``units.txt`` and no others. Unit text passes a small grammar here (a product,
at most one solidus, the divisor one unit or bracketed) before a single unit name reaches the registry.

May import: the standard library, ``faults`` and, when first needed, pint. Must never: know YAML, read a
calculation file, or assume a unit that was not written.
"""

from __future__ import annotations

import difflib
import functools
import math
import re
import unicodedata
from collections.abc import Callable, Iterable, Mapping
from decimal import Decimal
from fractions import Fraction
from pathlib import Path
from typing import TYPE_CHECKING, Any, Literal, NamedTuple

from calcbook.faults import Fault, Place, shown

if TYPE_CHECKING:
    import pint

Dimension = tuple[Fraction, Fraction, Fraction, Fraction, Fraction]
"""Exponents of m, kg, s, K and mol, in this order."""

Sign = Literal["positive", "not negative", "any"]

BASE_UNITS = ("m", "kg", "s", "K", "mol")
_BASE_NAMES = ("[length]", "[mass]", "[time]", "[temperature]", "[amount]")

LONGEST_TEXT = 120
LONGEST_UNIT = 60
MOST_FACTORS = 8
LARGEST_POWER = 6


def _dimension(*exponents: int) -> Dimension:
    m, kg, s, k, mol = (Fraction(exponent) for exponent in exponents)
    return (m, kg, s, k, mol)


DIMENSIONLESS: Dimension = _dimension(0, 0, 0, 0, 0)
_TEMPERATURE = _dimension(0, 0, 0, 1, 0)
_PRESSURE = _dimension(-1, 1, -2, 0, 0)

ANGLES = frozenset({"deg", "rad"})
POINT_SCALES = frozenset({"degC", "degF"})
ABSOLUTE_SCALES = frozenset({"K", "degR"})

# Display choices of this book; common practice of process data sheets.
SI_DISPLAY: dict[str, str] = {
    "temperature": "degC",
    "temperature difference": "K",
    "pressure": "bar",
    "gauge pressure": "barg",
    "density": "kg/m^3",
    "viscosity": "Pa s",
    "kinematic viscosity": "m^2/s",
    "conductivity": "W/(m K)",
    "wall conductivity": "W/(m K)",
    "heat capacity": "J/(kg K)",
    "expansion coefficient": "1/K",
    "mass flow": "kg/s",
    "volume flow": "m^3/s",
    "speed": "m/s",
    "flow area": "m^2",
    "length": "m",
    "characteristic length": "m",
    "diameter": "mm",
    "inside diameter": "mm",
    "outside diameter": "mm",
    "hydraulic diameter": "mm",
    "shell inside diameter": "mm",
    "surroundings diameter": "mm",
    "critical radius": "mm",
    "thickness": "mm",
    "height": "m",
    "width": "m",
    "perimeter": "m",
    "area": "m^2",
    "roughness": "mm",
    "angle": "deg",
    "pressure drop": "kPa",
    "film coefficient": "W/(m^2 K)",
    "overall coefficient": "W/(m^2 K)",
    "area resistance": "m^2 K/W",
    "resistance": "K/W",
    "conductance": "W/K",
    "heat flow": "W",
    "heat flux": "W/m^2",
    "time": "s",
    "service time": "days",
    "cleaning interval": "days",
}

US_CUSTOMARY: dict[str, str] = {
    "service time": "days",
    "cleaning interval": "days",
    "temperature": "degF",
    "temperature difference": "degR",
    "pressure": "psia",
    "gauge pressure": "psig",
    "pressure drop": "psi",
    "density": "lb/ft^3",
    "viscosity": "cP",
    "kinematic viscosity": "ft^2/s",
    "conductivity": "Btu/(h ft degF)",
    "wall conductivity": "Btu/(h ft degF)",
    "heat capacity": "Btu/(lb degF)",
    "expansion coefficient": "1/degF",
    "mass flow": "lb/h",
    "volume flow": "ft^3/s",
    "speed": "ft/s",
    "flow area": "ft^2",
    "length": "ft",
    "characteristic length": "ft",
    "diameter": "in",
    "inside diameter": "in",
    "outside diameter": "in",
    "hydraulic diameter": "in",
    "shell inside diameter": "in",
    "surroundings diameter": "in",
    "critical radius": "in",
    "thickness": "in",
    "height": "ft",
    "width": "ft",
    "perimeter": "ft",
    "area": "ft^2",
    "roughness": "in",
    "angle": "deg",
    "film coefficient": "Btu/(h ft^2 degF)",
    "overall coefficient": "Btu/(h ft^2 degF)",
    "area resistance": "h ft^2 degF/Btu",
    "resistance": "h degF/Btu",
    "conductance": "Btu/(h degF)",
    "heat flow": "Btu/h",
    "heat flux": "Btu/(h ft^2)",
    "time": "h",
}

_SI_TEXTS = (
    "m", "m^2", "m^3", "kg", "s", "K", "mol", "kg/m^3", "Pa", "Pa s", "m^2/s", "m/s", "m/s^2", "kg/s",
    "m^3/s", "kg/(m^2 s)", "N", "J", "W", "W/m^2", "W/m^3", "W/(m K)", "W/(m^2 K)", "m^2 K/W", "K/W",
    "W/K", "m K/W", "J/kg", "J/(kg K)", "J/K", "1/K", "1/m", "1/s", "N/m", "W/(m^2 K^4)", "Pa/m",
    "kg/mol", "J/mol", "J/(mol K)", "J/(m^2 K s^0.5)",
)  # fmt: skip
"""Unit texts that ``si_unit`` prefers over products of base units."""


class QuantityFault(Exception):
    """What an engineer wrote that cannot be taken as a quantity.

    ``column`` is the 1-based place in the text that was read, ``end_column`` the first place after it;
    ``found``, ``expected`` and ``nearest`` are the facts that mend it.
    """

    def __init__(
        self,
        code: str,
        message: str,
        *,
        column: int = 1,
        end_column: int = 2,
        found: str = "",
        expected: str = "",
        nearest: Iterable[str] = (),
    ) -> None:
        super().__init__(message)
        self.code = code
        self.message = message
        self.column = column
        self.end_column = max(end_column, column + 1)
        self.found = found
        self.expected = expected
        self.nearest: tuple[str, ...] = tuple(nearest)

    def moved(self, offset: int) -> QuantityFault:
        """The same fault, ``offset`` characters further along its text."""
        return QuantityFault(
            self.code,
            self.message,
            column=self.column + offset,
            end_column=self.end_column + offset,
            found=self.found,
            expected=self.expected,
            nearest=self.nearest,
        )

    def at(self, place: Place, use: str = "") -> Fault:
        """The fault of a file, at a place there; ``use`` tells what the quantity is read for."""
        message = f"{self.message} ({use})" if use else self.message
        return Fault(self.code, place, message, self.found, self.expected, self.nearest)

    def within(self, place: Place, use: str = "") -> Fault:
        """The same at the characters that are wrong, where ``place`` is that of the whole text."""
        return self.at(place.part(self.column - 1, self.end_column - self.column), use)


class QuantityKind(NamedTuple):
    """One entry of the vocabulary: what a quantity is called, its SI unit, and which values it may have.

    ``scale`` is "point" for a temperature (degC and degF are points of a scale), else "".
    ``reading`` is "absolute" or "gauge" for a pressure, else "". ``least`` and ``most`` are what it cannot pass by
    its definition, as the vocabulary writes them, or "". ``counts`` tells a number of things: "whole" where they are
    not parted, "mean" where a mean of several may stand for them, else "".
    """

    name: str
    symbol: str
    unit: str
    dimension: Dimension
    digits: int
    meaning: str
    scale: str = ""
    reading: str = ""
    flag: bool = False
    sign: Sign = "any"
    least: str = ""
    most: str = ""
    counts: str = ""

    @property
    def whole(self) -> bool:
        """Whether it counts things that are not parted."""
        return self.counts == "whole"

    @property
    def bounds(self) -> tuple[float, float]:
        """The least and the greatest value in SI that its definition allows; infinite where there is none."""
        return _bound(self.least, -math.inf), _bound(self.most, math.inf)

    def allows(self, value: float) -> bool:
        """Whether the quantity can have an SI value, by its sign and its definition."""
        return bool(self.allowed(value))

    def allowed(self, values: Any) -> Any:
        """``allows`` for a figure or an array of them; one that is not known cannot be."""
        least, most = self.bounds
        found = (values >= least) & (values <= most)
        if self.whole:
            found = found & (values % 1.0 == 0.0)
        if self.scale == "point" or (self.sign == "positive" and self.reading != "gauge"):
            return found & (values > 0.0)
        if self.sign != "any" and self.reading != "gauge":
            return found & (values >= 0.0)
        return found


class Quantity(NamedTuple):
    """A number with its unit: the SI value, and the text as it was typed (blanks collapsed).

    ``reading`` tells how the unit was understood: "point", "difference" or, while no kind is known,
    "point or difference" for a temperature; "absolute", "gauge" or "taken as absolute" for a pressure;
    "" otherwise. The value of a gauge pressure is the pressure above the site pressure, in Pa.
    """

    value: float
    text: str
    number_text: str
    unit_text: str
    dimension: Dimension
    reading: str = ""

    def on_base_of(self, other: Quantity) -> bool:
        """Whether both count from one zero: both gauge pressures, or neither of them."""
        return (self.reading == "gauge") == (other.reading == "gauge")


class Tolerance(NamedTuple):
    """A half-width: in SI units, or as a fraction of the value when ``relative``."""

    half_width: float
    relative: bool
    text: str


# --- single units ---------------------------------------------------------------------------------


class _Atom(NamedTuple):
    """One unit by itself: SI value = typed value * factor + offset (offset of a temperature scale)."""

    factor: Fraction
    dimension: Dimension
    offset: Fraction = Fraction(0)


# The units of a plain SI calculation, so that it need not wait for the registry to load (0.1 s).
# A test holds every entry to units.txt.
_READY: dict[str, _Atom] = {
    "m": _Atom(Fraction(1), _dimension(1, 0, 0, 0, 0)),
    "mm": _Atom(Fraction(1, 1000), _dimension(1, 0, 0, 0, 0)),
    "um": _Atom(Fraction(1, 1000000), _dimension(1, 0, 0, 0, 0)),
    "kg": _Atom(Fraction(1), _dimension(0, 1, 0, 0, 0)),
    "g": _Atom(Fraction(1, 1000), _dimension(0, 1, 0, 0, 0)),
    "t": _Atom(Fraction(1000), _dimension(0, 1, 0, 0, 0)),
    "s": _Atom(Fraction(1), _dimension(0, 0, 1, 0, 0)),
    "min": _Atom(Fraction(60), _dimension(0, 0, 1, 0, 0)),
    "h": _Atom(Fraction(3600), _dimension(0, 0, 1, 0, 0)),
    "K": _Atom(Fraction(1), _TEMPERATURE),
    "degC": _Atom(Fraction(1), _TEMPERATURE, Fraction("273.15")),
    "N": _Atom(Fraction(1), _dimension(1, 1, -2, 0, 0)),
    "Pa": _Atom(Fraction(1), _PRESSURE),
    "mPa": _Atom(Fraction(1, 1000), _PRESSURE),
    "kPa": _Atom(Fraction(1000), _PRESSURE),
    "MPa": _Atom(Fraction(1000000), _PRESSURE),
    "bar": _Atom(Fraction(100000), _PRESSURE),
    "J": _Atom(Fraction(1), _dimension(2, 1, -2, 0, 0)),
    "kJ": _Atom(Fraction(1000), _dimension(2, 1, -2, 0, 0)),
    "W": _Atom(Fraction(1), _dimension(2, 1, -3, 0, 0)),
    "kW": _Atom(Fraction(1000), _dimension(2, 1, -3, 0, 0)),
    "mol": _Atom(Fraction(1), _dimension(0, 0, 0, 0, 1)),
    "rad": _Atom(Fraction(1), DIMENSIONLESS),
    "percent": _Atom(Fraction(1, 100), DIMENSIONLESS),
}


@functools.cache
def _registry() -> pint.UnitRegistry[Any]:
    """The one registry, read from our own definition file; nothing of it is kept on disk."""
    import pint

    definitions = Path(__file__).with_name("units.txt")
    return pint.UnitRegistry(str(definitions), non_int_type=Fraction, cache_folder=None)


@functools.cache
def unit_names() -> tuple[str, ...]:
    """Every unit name that is read, sorted."""
    return tuple(sorted(name for name in _registry() if not name.startswith(("delta_", "Δ"))))


@functools.lru_cache(maxsize=1024)
def _registered(name: str) -> _Atom | None:
    """A unit as the registry has it, or None. Only exact names: the library would also read plurals."""
    if name not in unit_names():
        return None
    registry = _registry()
    if name in POINT_SCALES:
        offset = Fraction(registry.Quantity(Fraction(0), name).to("K").magnitude)
        factor = Fraction(registry.Quantity(Fraction(1), name).to("K").magnitude) - offset
        return _Atom(factor, _TEMPERATURE, offset)
    one = registry.Quantity(Fraction(1), name)
    exponents = one.dimensionality
    m, kg, s, k, mol = (Fraction(str(exponents.get(base, 0))) for base in _BASE_NAMES)
    return _Atom(Fraction(one.to_root_units().magnitude), (m, kg, s, k, mol))


def _atom(name: str) -> _Atom | None:
    return _READY.get(name) or _registered(name)


_SPELLINGS = {"%": "percent", "°": "deg", "°C": "degC", "°F": "degF", "°R": "degR", "℃": "degC", "℉": "degF"}
_SIGNS = {"percent": "%", "deg": "°", "degC": "°C", "degF": "°F", "degR": "°R", "um": "µm", "uPa": "µPa"}
_MICRO = str.maketrans({"\u00b5": "u", "\u03bc": "u"})


def _plain_name(name: str) -> str:
    """A unit name in the letters of units.txt."""
    return _SPELLINGS.get(name) or name.translate(_MICRO)


_MEANT = {
    "F": ("degF",), "R": ("degR",), "degK": ("K",), "°K": ("K",), "Celsius": ("degC",),
    "celsius": ("degC",), "centigrade": ("degC",), "Fahrenheit": ("degF",), "fahrenheit": ("degF",),
    "Kelvin": ("K",), "kelvin": ("K",), "Rankine": ("degR",), "rankine": ("degR",),
    "delta_degC": ("K",), "delta_degF": ("degR",), "deltaC": ("K",), "deltaF": ("degR",),
    "meter": ("m",), "metre": ("m",), "meters": ("m",), "metres": ("m",), "micron": ("um",),
    "inch": ("in",), "inches": ("in",), "foot": ("ft",), "feet": ("ft",), "pound": ("lb",),
    "pounds": ("lb",), "lbs": ("lb",), "sec": ("s",), "second": ("s",),
    "seconds": ("s",), "minute": ("min",), "minutes": ("min",), "hour": ("h",), "hours": ("h",),
    "tonne": ("t",), "tonnes": ("t",), "ton": ("t", "lb"), "kp": ("kgf",),
    "at": ("kgf/cm^2",), "ata": ("kgf/cm^2(a)",), "ati": ("kgf/cm^2(g)",), "mH2O": ("kPa",),
    "BTUH": ("Btu/h",), "Btuh": ("Btu/h",), "hp": ("kW", "W"), "HP": ("kW", "W"),
    "kPag": ("kPa(g)",), "kPaa": ("kPa(a)",), "barA": ("bara",), "barG": ("barg",),
    "atg": ("kgf/cm^2(g)",), "atü": ("kgf/cm^2(g)",), "PSIG": ("psig",), "PSIA": ("psia",),
    "mWC": ("kPa",), "mWS": ("kPa",), "m2K": ("m^2 K",), "ft2F": ("ft^2 degF",),
    "ppm": ("mg/kg",), "Poise": ("P",), "poise": ("P",), "M": ("m",), "S": ("s",),
}  # fmt: skip
"""Frequent wrong names that similarity of spelling does not find."""


def _nearest_units(name: str) -> tuple[str, ...]:
    if name in _MEANT:
        return _MEANT[name]
    with_power = re.fullmatch(r"([A-Za-z]+)([2-4])", name)
    if with_power and _atom(with_power[1]):
        return (f"{with_power[1]}^{with_power[2]}",)
    names = unit_names()
    same_letters = tuple(known for known in names if known.casefold() == name.casefold())
    if same_letters:
        return same_letters
    return tuple(difflib.get_close_matches(name, names, n=3, cutoff=0.6))


# --- the grammar of units -------------------------------------------------------------------------


class _Factor(NamedTuple):
    """One unit with its power; ``power`` is as typed, ``below`` when it stands after the solidus."""

    name: str
    power: Fraction
    below: bool


class _Unit(NamedTuple):
    """A unit text understood: its factors, and what they amount to."""

    factors: tuple[_Factor, ...]
    factor: Fraction
    dimension: Dimension

    @property
    def sole_name(self) -> str:
        """The name when the unit is one name and nothing else, else ""."""
        if len(self.factors) != 1:
            return ""
        only = self.factors[0]
        return only.name if only.power == 1 and not only.below else ""


_SUPERSCRIPTS = "⁰¹²³⁴⁵⁶⁷⁸⁹"
_FROM_SUPERSCRIPT = str.maketrans(_SUPERSCRIPTS + "⁻", "0123456789-")
_TO_SUPERSCRIPT = str.maketrans("0123456789-", _SUPERSCRIPTS + "⁻")
_TOKEN = re.compile(
    rf"(?P<name>%|℃|℉|°[A-Za-z]*|[^\W\d_{_SUPERSCRIPTS}][^\W{_SUPERSCRIPTS}]*)"
    rf"|(?P<power>(?:\^|\*\*)[ ]?[+\-\u2212]?[0-9]+(?:\.[0-9]+)?|⁻?[{_SUPERSCRIPTS}]+)"
    r"|(?P<one>1)(?![0-9.])"
    r"|(?P<times>[*·⋅])"
    r"|(?P<solidus>/)"
    r"|(?P<open>\()"
    r"|(?P<close>\))"
    r"|(?P<blank>[ \t\r\n\u00a0\u2009\u202f]+)"
)


class _Token(NamedTuple):
    kind: str
    text: str
    start: int

    @property
    def end(self) -> int:
        return self.start + len(self.text)


def _tokens(text: str) -> list[_Token]:
    tokens: list[_Token] = []
    position = 0
    while position < len(text):
        match = _TOKEN.match(text, position)
        if match is None:
            raise _unreadable_unit(text, position, position + 1)
        if match.lastgroup != "blank":
            tokens.append(_Token(str(match.lastgroup), match.group(), position))
        position = match.end()
    return tokens


def _unreadable_unit(text: str, start: int, end: int) -> QuantityFault:
    part = text[start:end]
    nearest = {'"': ("in",), "'": ("ft",), "º": ("°C",), "\u00d7": ("·",), "^": ("^2",)}.get(part, ())
    return QuantityFault(
        "unit-unknown",
        f"{shown(part)!r} cannot stand here in a unit",
        column=start + 1,
        end_column=end + 1,
        found=shown(text),
        expected="a unit such as W/(m^2 K), m^2 K/W or kg/s",
        nearest=nearest,
    )


def _too_complex(message: str, text: str, start: int = 0, end: int | None = None) -> QuantityFault:
    return QuantityFault(
        "unit-too-complex",
        message,
        column=start + 1,
        end_column=(len(text) if end is None else end) + 1,
        found=shown(text),
        expected=f"at most {MOST_FACTORS} units, each to a power from -{LARGEST_POWER} to {LARGEST_POWER}",
    )


class _UnitParser:
    """Reads ``product [/ factor | / (product)]``; the first product may stand in brackets."""

    def __init__(self, text: str) -> None:
        self.text = text
        self.tokens = _tokens(text)
        self.next = 0
        self.factors: list[_Factor] = []

    def parse(self) -> tuple[_Factor, ...]:
        if not self._at("solidus"):
            self._side(below=False)
        above_end = self.next
        if self._take("solidus"):
            bracketed = self._at("open")
            self._side(below=True, single=True)
            self._refuse_more(above_end, bracketed)
        if self.next < len(self.tokens):
            token = self.tokens[self.next]
            raise _unreadable_unit(self.text, token.start, token.end)
        return tuple(self.factors)

    def _at(self, kind: str) -> bool:
        return self.next < len(self.tokens) and self.tokens[self.next].kind == kind

    def _take(self, kind: str) -> _Token | None:
        if not self._at(kind):
            return None
        self.next += 1
        return self.tokens[self.next - 1]

    def _side(self, below: bool, single: bool = False) -> None:
        bracket = self._take("open")
        self._factor(below)
        while (bracket or not single) and (self._take("times") or self._at("name")):
            self._factor(below)
        if bracket and not self._take("close"):
            if self._at("solidus"):
                raise _unreadable_unit(self.text, bracket.start, len(self.text))
            end = self.tokens[self.next].end if self.next < len(self.tokens) else len(self.text)
            raise _unreadable_unit(self.text, bracket.start, end)

    def _factor(self, below: bool) -> None:
        if self._take("one"):
            return
        token = self._take("name")
        if token is None:
            at = self.tokens[min(self.next, len(self.tokens) - 1)]
            raise _unreadable_unit(self.text, at.start, at.end)
        if len(self.factors) == MOST_FACTORS:
            raise _too_complex(f"a unit has at most {MOST_FACTORS} factors", self.text)
        self.factors.append(_Factor(self._known(token), self._power(), below))

    def _known(self, token: _Token) -> str:
        name = _plain_name(token.text)
        if name == "C" or (name == "deg" and self._at("name") and self.tokens[self.next].text in "CFKR"):
            raise self._no_degree(token)
        if _atom(name) is None:
            raise self._unknown(token)
        return name

    def _no_degree(self, token: _Token) -> QuantityFault:
        """``C`` by itself is the coulomb; ``deg C`` would be an angle times a coulomb."""
        alone = token.text == "C"
        scale = "degC" if alone else "deg" + self.tokens[self.next].text
        end = token.end if alone else self.tokens[self.next].end
        scale = "K" if scale == "degK" else scale
        written = self.text[token.start : end]
        return QuantityFault(
            "unit-coulomb" if alone else "unit-unknown",
            f"C is the coulomb; a degree Celsius is written {scale}"
            if alone
            else f"{shown(written)!r} is written in one word: {scale}",
            column=token.start + 1,
            end_column=end + 1,
            found=shown(written),
            expected="a temperature unit: degC, degF, K or degR",
            nearest=(self.text[: token.start] + scale + self.text[end:],),
        )

    def _unknown(self, token: _Token) -> QuantityFault:
        strange = [character for character in token.text if ord(character) > 127 and character not in "°µμ"]
        said = f"{shown(token.text)!r} is not a known unit"
        if strange:
            code_point = f"U+{ord(strange[0]):04X}"
            said += f": it holds {unicodedata.name(strange[0], code_point).lower()} ({code_point})"
        return QuantityFault(
            "unit-unknown",
            said,
            column=token.start + 1,
            end_column=token.end + 1,
            found=shown(token.text),
            expected="a unit of the list in units.txt",
            nearest=_nearest_units(token.text),
        )

    def _power(self) -> Fraction:
        token = self._take("power")
        if token is None:
            return Fraction(1)
        if self._at("power"):
            raise _too_complex("a power of a power is not read", self.text, token.start)
        digits = token.text.lstrip("^* ").translate(_FROM_SUPERSCRIPT).replace("\u2212", "-")
        power = Fraction(digits) if len(digits) <= 6 else Fraction(LARGEST_POWER + 1)
        whole = power.denominator == 1 and power != 0 and abs(power) <= LARGEST_POWER
        if not whole and power != Fraction(1, 2):
            message = f"a power is a whole number from -{LARGEST_POWER} to {LARGEST_POWER} or 0.5, and not 0"
            raise _too_complex(message, self.text, token.start, token.end)
        return power

    def _refuse_more(self, above_end: int, bracketed: bool) -> None:
        """After the divisor nothing may follow: ``W/m^2 K`` has two readings, and so has ``a/b/c``."""
        if self.next == len(self.tokens):
            return
        rest = self.tokens[self.next]
        if rest.kind not in ("name", "times", "solidus"):
            raise _unreadable_unit(self.text, rest.start, rest.end)
        above = self.text[: self.tokens[above_end].start].strip()
        divisor = self.text[self.tokens[above_end].end : rest.start].strip()
        if bracketed:
            divisor = divisor[1:-1]
        after = self.text[rest.start :].lstrip("/*·⋅ ")
        in_bracket = f"{above}/({divisor} {' '.join(re.split('[/ *·⋅()]+', after)).strip()})"
        others = [f"{above} {after}/{divisor}" if " " not in divisor else f"{above} {after}/({divisor})"]
        if rest.kind == "solidus" or "/" in after or above in ("", "1"):
            others = []
        raise QuantityFault(
            "unit-ambiguous",
            f"{shown(self.text)!r} has a unit after the divisor: a divisor of several units is bracketed",
            column=self.tokens[above_end].start + 1,
            end_column=len(self.text) + 1,
            found=shown(self.text),
            expected="one solidus, followed by one unit or by a bracket",
            nearest=(in_bracket, *others),
        )


def _root(value: Fraction) -> Fraction:
    """Square root of a fraction to 40 digits, far beyond double precision."""
    scale = 10**40
    root = math.isqrt(value.numerator * value.denominator * scale * scale)
    return Fraction(root, value.denominator * scale)


@functools.lru_cache(maxsize=1024)
def _unit(text: str) -> _Unit:
    """A unit text understood, without a suffix for gauge or absolute. Columns count from its start."""
    if len(text) > LONGEST_UNIT:
        raise _too_complex(f"a unit has at most {LONGEST_UNIT} characters", text)
    if not text.strip():
        return _Unit((), Fraction(1), DIMENSIONLESS)
    factors = _UnitParser(text).parse()
    amount = Fraction(1)
    exponents = list(DIMENSIONLESS)
    for factor in factors:
        atom = _atom(factor.name)
        assert atom is not None  # the parser let no unknown name pass
        power = -factor.power if factor.below else factor.power
        halves = power.denominator == 2
        amount *= _root(atom.factor) ** power.numerator if halves else atom.factor**power.numerator
        exponents = [have + power * more for have, more in zip(exponents, atom.dimension, strict=True)]
    m, kg, s, k, mol = exponents
    return _Unit(factors, amount, (m, kg, s, k, mol))


_PRESSURE_NAMES = {"bara": "bar", "barg": "bar", "psia": "psi", "psig": "psi"}


def _pressure_suffix(unit_text: str) -> tuple[str, str]:
    """The unit without its ``a`` or ``g``, and "absolute", "gauge" or "" for none."""
    if unit_text in _PRESSURE_NAMES:
        return _PRESSURE_NAMES[unit_text], "absolute" if unit_text.endswith("a") else "gauge"
    suffix = unit_text[-3:]
    if suffix in ("(a)", "(g)"):
        return unit_text[:-3].rstrip(), "absolute" if suffix == "(a)" else "gauge"
    return unit_text, ""


def _understood(unit_text: str) -> tuple[_Unit, str]:
    """A unit text with its pressure reading ("absolute", "gauge" or "")."""
    plain, reading = _pressure_suffix(unit_text)
    unit = _unit(plain)
    if reading and unit.dimension != _PRESSURE:
        raise _unreadable_unit(unit_text, len(plain), len(unit_text))
    return unit, reading


# --- numbers --------------------------------------------------------------------------------------

_GROUP = "[\u2009\u202f\u00a0]"
_NUMBER = re.compile(
    rf"[+\-\u2212]?(?:(?:[0-9]{{1,3}}(?:{_GROUP}[0-9]{{3}})+(?![0-9])|[0-9]+)(?:\.[0-9]*)?|\.[0-9]+)"
    r"(?:[eE][+\-\u2212]?[0-9]+)?"
)
_NOT_FINITE = re.compile(r"[+\-\u2212]?\.?(?:nan|inf|infinity|∞)(?![a-z])", re.IGNORECASE)
_POWER_OF_TEN = re.compile(
    rf"(?:([+\-]?[0-9.]+)\s*[x\u00d7*·⋅]\s*)?10(?:\^|\*\*)?([+\-\u2212⁻]?[0-9{_SUPERSCRIPTS}]+)"
)


class _Reading(NamedTuple):
    """A text taken apart: exact number, understood unit, and the columns of each."""

    text: str
    number: Fraction
    number_text: str
    unit: _Unit
    unit_text: str
    pressure: str
    number_start: int
    unit_start: int

    def fault(
        self, code: str, message: str, of: str, *, expected: str = "", nearest: Iterable[str] = ()
    ) -> QuantityFault:
        """A fault at the number, at the unit or at the whole text."""
        number_end = self.number_start + len(self.number_text)
        unit_end = self.unit_start + len(self.unit_text)
        start, end = {
            "number": (self.number_start, number_end),
            "unit": (self.unit_start, unit_end),
            "whole": (self.number_start, max(number_end, unit_end)),
        }[of]
        return QuantityFault(
            code,
            message,
            column=start + 1,
            end_column=end + 1,
            found=shown(self.text[start:end]),
            expected=expected,
            nearest=nearest,
        )


def _number_fault(
    code: str, message: str, text: str, start: int, nearest: Iterable[str] = ()
) -> QuantityFault:
    return QuantityFault(
        code,
        message,
        column=start + 1,
        end_column=len(text.rstrip()) + 1,
        found=shown(text.strip()),
        expected="a number and a unit, such as 15.4 mm or 1e-4 m^2 K/W",
        nearest=nearest,
    )


def _exact(number_text: str, text: str, start: int) -> Fraction:
    """The typed number, exactly; refused where double precision cannot hold it."""
    plain = re.sub(_GROUP, "", number_text).replace("\u2212", "-")
    as_float = float(plain)
    if math.isinf(as_float):
        raise _number_fault("number-not-finite", f"{shown(number_text)} is too large", text, start)
    if as_float == 0.0:
        # not by Fraction: the exponent may be enormous
        if re.search("[1-9]", re.split("[eE]", plain)[0]):
            raise _number_fault("number-not-finite", f"{shown(number_text)} is too small", text, start)
        return Fraction(0)
    return Fraction(plain)


def _split(text: str) -> tuple[str, int, str, int]:
    """Number text and its offset, unit text and its offset."""
    if len(text) > LONGEST_TEXT:
        raise _too_complex(f"a quantity has at most {LONGEST_TEXT} characters", text)
    start = len(text) - len(text.lstrip())
    if _NOT_FINITE.match(text, start):
        message = f"{shown(text.strip())!r} is not a finite number"
        raise _number_fault("number-not-finite", message, text, start)
    match = _NUMBER.match(text, start)
    if match is None:
        message = f"{shown(text.strip())!r} starts with no number" if text.strip() else "the text is empty"
        raise _number_fault("number-unreadable", message, text, start)
    rest = text[match.end() :]
    _refuse_rest(text, start, match.group(), rest)
    unit_text = rest.strip()
    return match.group(), start, unit_text, match.end() + len(rest) - len(rest.lstrip())


def _refuse_rest(text: str, start: int, number: str, rest: str) -> None:
    """What follows the number must be a unit; a second number has its reason said."""
    nearest: tuple[str, ...] = ()
    stripped = rest.lstrip()
    if re.match(r",\s?[0-9]", rest):
        raise _decimal_comma(text, start)
    power_of_ten = _POWER_OF_TEN.match(text, start)
    if power_of_ten and re.match(r"\s*[x\u00d7*·⋅^⁻⁰¹²³⁴⁵⁶⁷⁸⁹]", rest):
        exponent = power_of_ten[2].translate(_FROM_SUPERSCRIPT).replace("\u2212", "-")
        better = f"{power_of_ten[1] or '1'}e{exponent}{text[power_of_ten.end() :]}"
        raise _number_fault("number-unreadable", "a power of ten is written with e", text, start, (better,))
    division = re.match(r"/\s*([0-9]+)(?![0-9.])(.*)", stripped, re.DOTALL)
    if division:
        if number.isdigit() and int(division[1]):
            nearest = (f"{float(Fraction(int(number), int(division[1]))):.6g}{division[2]}",)
        raise _number_fault("number-unreadable", "a fraction is written as a decimal", text, start, nearest)
    if re.match(r"1\s*/", stripped):
        return
    if re.match(r"[0-9.,+\-\u2212±_'\u2019:;~=<>&^]", stripped):
        joined = re.match(r"[0-9]{3}(?: [0-9]{3})*(?![0-9])", stripped)
        nearest = (number + joined[0].replace(" ", "") + stripped[joined.end() :],) if joined else ()
        message = f"{shown(text.strip())!r} is not one number with one unit"
        raise _number_fault("number-unreadable", message, text, start, nearest)


def _decimal_comma(text: str, start: int) -> QuantityFault:
    stripped = text.strip()
    nearest = [stripped.replace(",", ".")] if stripped.count(",") == 1 and "." not in stripped else []
    if re.match(r"[+\-]?[0-9]{1,3}(?:,[0-9]{3})+(?![0-9])", stripped):
        nearest.append(stripped.replace(",", ""))
    message = "a comma in a number is not read: the decimal sign is a point, and commas group no digits"
    return _number_fault("number-decimal-comma", message, text, start, nearest)


@functools.lru_cache(maxsize=2048)
def _read(text: str) -> _Reading:
    number_text, number_start, unit_text, unit_start = _split(text)
    number = _exact(number_text, text, number_start)
    try:
        unit, pressure = _understood(unit_text)
    except QuantityFault as fault:
        raise _with_number(fault, number_text, unit_text).moved(unit_start) from None
    return _Reading(text, number, number_text, unit, unit_text, pressure, number_start, unit_start)


def _with_number(fault: QuantityFault, number_text: str, unit_text: str) -> QuantityFault:
    """Of a coulomb, what was probably meant is shown with its number."""
    if fault.code == "unit-coulomb":
        fault.nearest = tuple(f"{number_text} {unit}" for unit in fault.nearest)
        fault.found = shown(f"{number_text} {unit_text}")
    return fault


def _rounded(exact: Fraction, reading: _Reading) -> float:
    """The one rounding to double precision."""
    try:
        value = float(exact)
    except OverflowError:
        raise reading.fault("number-not-finite", "the value in SI units is too large", "whole") from None
    if value == 0.0 and exact:
        raise reading.fault("number-not-finite", "the value in SI units is too small", "whole")
    return value


# --- quantities -----------------------------------------------------------------------------------


def read_any(text: str) -> Quantity:
    """Read a quantity whose kind is not yet known; its unit tells the dimension.

    ``degC`` or ``degF`` by itself is a point of the scale; ``K`` or ``degR`` by itself is read as
    "point or difference"; a bare number is dimensionless. Raises ``QuantityFault``.
    """
    reading = _read(text)
    name = reading.unit.sole_name
    if name in POINT_SCALES:
        return _point(reading)
    value = _rounded(reading.number * reading.unit.factor, reading)
    return _quantity(reading, value, "point or difference" if name in ABSOLUTE_SCALES else reading.pressure)


def read_quantity(text: str, kind: QuantityKind) -> Quantity:
    """Read a quantity of a known kind from text such as ``15.4 mm``; the value is in SI units.

    Raises ``QuantityFault`` for a missing, unknown, ambiguous or wrong unit, an unreadable or not finite
    number, and a value that the kind cannot have.
    """
    try:
        reading = _read(text)
    except QuantityFault as fault:
        raise _fitting_first(fault, kind) from None
    _check_unit(reading, kind)
    if kind.scale == "point":
        return _point(reading)
    value = _rounded(reading.number * reading.unit.factor, reading)
    _check_sign(reading, kind)
    _check_bounds(reading, kind, value)
    if kind.dimension == _TEMPERATURE:
        return _quantity(reading, value, "difference")
    if kind.reading == "absolute":
        return _quantity(reading, value, reading.pressure or "taken as absolute")
    return _quantity(reading, value, reading.pressure)


def as_kind(quantity: Quantity, kind: QuantityKind) -> Quantity:
    """A quantity read without a kind, now read as one: ``5 K`` becomes a point or a difference.

    Raises ``QuantityFault`` as ``read_quantity`` does; its columns are those of ``quantity.text``.
    """
    return read_quantity(quantity.text, kind)


def read_tolerance(text: str, kind: QuantityKind) -> Tolerance:
    """Read a half-width: ``2 %`` is relative, ``0.5 K`` or ``0.1 mm`` absolute in SI units.

    A per cent of a dimensionless value is relative to the value as well. A tolerance of a temperature is a
    difference, in K or degR, and never a per cent. Raises ``QuantityFault``.
    """
    reading = _read(text)
    collapsed = _collapsed(text)
    if reading.number < 0:
        raise reading.fault("quantity-negative", "a tolerance is not negative", "number")
    if reading.unit.sole_name == "percent":
        if kind.scale == "point":
            message = "a per cent of a temperature depends on where its scale starts: state it in K"
            raise reading.fault(
                "quantity-percent-of-temperature", message, "whole", expected="a difference such as 0.5 K"
            )
        return Tolerance(_rounded(reading.number / 100, reading), True, collapsed)
    if reading.pressure:
        raise _no_difference(reading, _pressure_suffix(reading.unit_text)[0])
    if reading.unit.dimension == _TEMPERATURE == kind.dimension:
        _check_difference(reading)
    else:
        _check_dimension(reading, kind)
    return Tolerance(_rounded(reading.number * reading.unit.factor, reading), False, collapsed)


def _quantity(reading: _Reading, value: float, how: str) -> Quantity:
    return Quantity(
        value,
        _collapsed(reading.text),
        reading.number_text,
        _collapsed(reading.unit_text),
        reading.unit.dimension,
        how,
    )


def _collapsed(text: str) -> str:
    # only ordinary blanks: a thin or no-break space may group the digits of the number
    return re.sub(r"[ \t\r\n]+", " ", text).strip()


def _point(reading: _Reading) -> Quantity:
    """A point of a temperature scale, above absolute zero."""
    atom = _atom(reading.unit.sole_name)
    assert atom is not None  # a sole name of a unit that was understood
    exact = reading.number * atom.factor + atom.offset
    if exact <= 0:
        written = f"{reading.number_text} {reading.unit_text}"
        message = f"{shown(written)} is {'at' if exact == 0 else 'below'} absolute zero"
        raise reading.fault("temperature-not-absolute", message, "whole", expected="more than 0 K")
    return _quantity(reading, _rounded(exact, reading), "point")


def _fitting_first(fault: QuantityFault, kind: QuantityKind) -> QuantityFault:
    """Of the readings of an ambiguous unit, only those that fit the kind, when one does."""
    if fault.code == "unit-ambiguous":
        fitting = tuple(unit for unit in fault.nearest if _has_dimension(unit, kind.dimension))
        fault.nearest = fitting or fault.nearest
    return fault


def _has_dimension(unit_text: str, dimension: Dimension) -> bool:
    try:
        return _understood(unit_text)[0].dimension == dimension
    except QuantityFault:
        return False


def _check_unit(reading: _Reading, kind: QuantityKind) -> None:
    _check_dimension(reading, kind)
    if kind.scale == "point":
        if not reading.unit.sole_name:
            message = "a temperature is written in one unit: in a compound a degree is a difference"
            raise reading.fault("unit-offset-compound", message, "unit", expected="degC, degF, K or degR")
    elif kind.dimension == _TEMPERATURE:
        _check_difference(reading)
    if kind.dimension == _PRESSURE:
        _check_pressure(reading, kind)


def _check_dimension(reading: _Reading, kind: QuantityKind) -> None:
    is_angle = kind.unit in ANGLES
    examples = _examples(kind)
    if not reading.unit_text and (kind.dimension != DIMENSIONLESS or is_angle):
        message = f"{reading.number_text} has no unit, and {kind.name} needs one"
        raise reading.fault("unit-missing", message, "number", expected=f"a unit such as {examples}")
    sole = reading.unit.sole_name
    if reading.unit.dimension == kind.dimension and (sole in ANGLES) == is_angle:
        return
    has = "no unit" if kind.dimension == DIMENSIONLESS and not is_angle else f"a unit such as {examples}"
    name = shown(reading.unit_text)
    raise reading.fault(
        "unit-dimension",
        f"{name} is not a unit of {kind.name}",
        "unit",
        expected=f"{kind.name} has {has}",
        nearest=_pressure_apart(reading.unit_text) if kind.dimension == _PRESSURE else (),
    )


def _pressure_apart(unit_text: str) -> tuple[str, ...]:
    """What ``bar g`` is meant to be: its last letter is a gram or a year otherwise."""
    found = re.fullmatch(r"(\S+) ([agAG])", unit_text.strip())
    if found is None or not _has_dimension(found[1], _PRESSURE):
        return ()
    letter = found[2].lower()
    return (f"{found[1]}{letter}" if found[1] in ("bar", "psi") else f"{found[1]}({letter})",)


def _examples(kind: QuantityKind) -> str:
    units = (SI_DISPLAY.get(kind.name, kind.unit), kind.unit, US_CUSTOMARY.get(kind.name, kind.unit))
    return ", ".join(dict.fromkeys(units))


def _check_difference(reading: _Reading) -> None:
    name = reading.unit.sole_name
    if name in POINT_SCALES:
        raise _no_difference(reading, "K" if name == "degC" else "degR")


def _no_difference(reading: _Reading, unit_text: str) -> QuantityFault:
    better = f"{reading.number_text} {unit_text}"
    message = f"{shown(reading.unit_text)} is a point of a scale; a difference is written {better}"
    expected = f"a difference in {unit_text}"
    return reading.fault("unit-offset-compound", message, "whole", expected=expected, nearest=(better,))


def _check_pressure(reading: _Reading, kind: QuantityKind) -> None:
    """A gauge pressure must say so; a quantity that is neither can be neither."""
    plain, number = _pressure_suffix(reading.unit_text)[0], reading.number_text
    if kind.reading == "gauge" and not reading.pressure:
        message = f"{number} {plain} does not say whether it is gauge or absolute"
        gauge = f"{plain}g" if plain in ("bar", "psi") else f"{plain}(g)"
        raise reading.fault(
            "unit-ambiguous", message, "unit", expected=f"a unit such as {_examples(kind)}", nearest=(gauge,)
        )
    if kind.reading == "gauge" and reading.pressure == "absolute":
        message = f"{shown(reading.unit_text)} is absolute, and {kind.name} is above the site pressure"
        raise reading.fault("unit-dimension", message, "unit", expected=f"a unit such as {_examples(kind)}")
    if not kind.reading and reading.pressure:
        message = f"{kind.name} is neither gauge nor absolute"
        raise reading.fault("unit-dimension", message, "unit", expected=plain, nearest=(plain,))


def _check_sign(reading: _Reading, kind: QuantityKind) -> None:
    if reading.pressure == "gauge" or kind.sign == "any":
        return
    if reading.number < 0 or (reading.number == 0 and kind.sign == "positive"):
        must = "greater than zero" if kind.sign == "positive" else "zero or greater"
        message = f"{kind.name} must be {must}"
        raise reading.fault("quantity-negative", message, "number", expected=f"a number {must}")


def _check_bounds(reading: _Reading, kind: QuantityKind, value: float) -> None:
    if kind.counts and reading.unit.sole_name == "percent":
        raise reading.fault(
            "unit-dimension",
            f"{kind.name} is a number of things, and no part of something",
            "unit",
            expected="a number",
        )
    least, most = kind.bounds
    if not least <= value <= most:
        must = f"{kind.least} or more" if value < least else f"{kind.most} or less"
        message = f"{kind.name} is by its definition {must}"
        raise reading.fault("quantity-beyond-definition", message, "number", expected=must)
    if kind.whole and not value.is_integer():
        message = f"{kind.name} must be a whole number"
        raise reading.fault("quantity-beyond-definition", message, "number", expected="a whole number")


@functools.lru_cache(maxsize=32)
def _bound(text: str, absent: float) -> float:
    return read_any(text).value if text else absent


# --- the vocabulary -------------------------------------------------------------------------------

_POSITIVE_UNITS = (
    "m", "m^2", "m^3", "kg/m^3", "Pa", "Pa s", "m^2/s", "W/(m K)", "J/(kg K)", "W/(m^2 K)",
)  # fmt: skip
_NOT_NEGATIVE_UNITS = ("kg/s", "m^3/s", "m/s", "m^2 K/W", "K/W", "W/K", "s")
_SIGN_OF_NAME: dict[str, Sign] = {
    "roughness": "not negative",
    "relative roughness": "not negative",
    "thickness": "not negative",
    "mass fraction": "not negative",
    "volume fraction": "not negative",
    "emissivity": "not negative",
    "effectiveness": "not negative",
    "friction factor": "not negative",
    "Reynolds number": "not negative",
    "Peclet number": "not negative",
    "Graetz number": "not negative",
    "tubes in parallel": "positive",
    "diameter ratio": "positive",
    "Prandtl number": "positive",
    "gauge pressure": "any",
}
_ENTRY_KEYS = frozenset(
    {"symbol", "unit", "digits", "meaning", "scale", "reading", "flag", "sign", "least", "most", "counts"}
)


def kind_from_entry(name: str, entry: Mapping[str, str]) -> QuantityKind:
    """A vocabulary entry (symbol, unit, digits, meaning; scale, reading, flag, sign, least, most, counts optional) as a kind.

    The sign follows from the name or the unit where the entry does not state it. Raises ``ValueError`` for an
    entry that the vocabulary may not hold, and ``QuantityFault`` for its unit.
    """
    unknown = sorted(set(entry) - _ENTRY_KEYS)
    if unknown:
        raise ValueError(f"vocabulary entry {name!r} has unknown keys: {', '.join(unknown)}")
    dimension = unit_factor(entry["unit"])[1]
    return QuantityKind(
        name=name,
        symbol=entry["symbol"],
        unit=entry["unit"],
        dimension=dimension,
        digits=int(entry["digits"]),
        meaning=entry["meaning"],
        scale=_one_of(name, entry, "scale", ("", "point")),
        reading=_one_of(name, entry, "reading", ("", "absolute", "gauge")),
        flag=_one_of(name, entry, "flag", ("", "false", "true")) == "true",
        sign=_sign(name, entry, dimension),
        least=entry.get("least", ""),
        most=entry.get("most", ""),
        counts=_one_of(name, entry, "counts", ("", "whole", "mean")),
    )


def _one_of(name: str, entry: Mapping[str, str], key: str, choices: tuple[str, ...]) -> str:
    value = entry.get(key, "")
    if value not in choices:
        raise ValueError(f"vocabulary entry {name!r}: {key} is {value!r}, and must be one of {choices}")
    return value


def _sign(name: str, entry: Mapping[str, str], dimension: Dimension) -> Sign:
    stated = _one_of(name, entry, "sign", ("", "positive", "not negative", "any"))
    signs: dict[str, Sign] = {"positive": "positive", "not negative": "not negative", "any": "any"}
    if stated:
        return signs[stated]
    if name in _SIGN_OF_NAME:
        return _SIGN_OF_NAME[name]
    if any(_unit(unit).dimension == dimension for unit in _POSITIVE_UNITS):
        return "positive"
    if any(_unit(unit).dimension == dimension for unit in _NOT_NEGATIVE_UNITS):
        return "not negative"
    return "any"


# --- units to and from text -----------------------------------------------------------------------


def unit_factor(unit_text: str) -> tuple[float, Dimension]:
    """SI value of one such unit (of a degree: the size of a difference of one), and the dimension.

    ``1`` or an empty text is the dimensionless unit. Raises ``QuantityFault``.
    """
    unit = _understood(unit_text)[0]
    return float(unit.factor), unit.dimension


@functools.lru_cache(maxsize=4096)
def in_unit(value_si: float, unit_text: str, point: bool = False) -> float:
    """A finite SI value expressed in a unit; ``point`` reads degC and degF as points of their scales.

    A gauge unit only names the unit: the site pressure is the caller's. Raises ``QuantityFault`` for the
    unit and ``ValueError`` for a value that is not finite.
    """
    if not math.isfinite(value_si):
        raise ValueError(f"{value_si} cannot be expressed in {unit_text}")
    unit = _understood(unit_text)[0]
    return float((Fraction(value_si) - (_offset(unit) if point else 0)) / unit.factor)


def _offset(unit: _Unit) -> Fraction:
    """Where the scale of a unit by itself starts, in SI; zero for one without a scale."""
    name = unit.sole_name
    atom = _atom(name) if name else None
    return atom.offset if atom else Fraction(0)


def si_value(number: Decimal, unit_text: str) -> float:
    """The SI value of a number in a unit, to the bits of what a text of both is read as.

    degC and degF are points of their scales; a gauge unit only names the unit. Raises ``QuantityFault``.
    """
    unit = _understood(unit_text)[0]
    return float(Fraction(number) * unit.factor + _offset(unit))


def display_unit(kind: QuantityKind, units: Literal["SI", "US customary"]) -> str:
    """The unit text in which a quantity of this kind is printed in a system of units.

    A kind that the tables do not name is printed in its own unit in SI, and in US customary units like the
    first quantity there of the same dimension, if any.
    """
    table = SI_DISPLAY if units == "SI" else US_CUSTOMARY
    if kind.name in table:
        return table[kind.name]
    if kind.dimension == DIMENSIONLESS or units == "SI":
        return kind.unit
    alike = (unit for unit in table.values() if unit_factor(unit)[1] == kind.dimension)
    return next(alike, kind.unit)


@functools.lru_cache(maxsize=1024)
def unit_display(unit_text: str) -> str:
    """A unit as it is printed, after the rules of the SI Brochure: ``W/(m²·K)``, ``kg/m³``, ``°C``.

    The dimensionless unit prints as nothing. Raises ``QuantityFault``.
    """
    if unit_text in _PRESSURE_NAMES:
        return unit_text
    unit, reading = _understood(unit_text)
    above = _product(factor for factor in unit.factors if not factor.below)
    below = _product(factor for factor in unit.factors if factor.below)
    if "·" in below:
        below = f"({below})"
    text = f"{above or '1'}/{below}" if below else above
    return text + {"absolute": "(a)", "gauge": "(g)", "": ""}[reading]


def _product(factors: Iterable[_Factor]) -> str:
    return "·".join(_SIGNS.get(factor.name, factor.name) + _raised(factor.power) for factor in factors)


def _raised(power: Fraction) -> str:
    if power == 1:
        return ""
    return "^0.5" if power.denominator == 2 else str(power).translate(_TO_SUPERSCRIPT)


@functools.cache
def _si_texts() -> dict[Dimension, str]:
    return {_unit(text).dimension: text for text in reversed(_SI_TEXTS)}


def si_unit(dimension: Dimension) -> str:
    """The coherent SI unit of a dimension as unit text: the usual one, else a product of base units.

    Exponents that the unit grammar does not read (thirds, powers above 4) are written all the same.
    """
    if dimension is DIMENSIONLESS or dimension == DIMENSIONLESS:
        return "1"
    usual = _si_texts().get(dimension)
    return usual or _base_product(dimension)


def _base_product(dimension: Dimension) -> str:
    above = _base_side(dimension, lambda exponent: exponent)
    below = _base_side(dimension, lambda exponent: -exponent)
    if not below:
        return above
    return f"{above or '1'}/({below})" if " " in below else f"{above or '1'}/{below}"


def _base_side(dimension: Dimension, signed: Callable[[Fraction], Fraction]) -> str:
    parts = []
    for base, exponent in zip(BASE_UNITS, map(signed, dimension), strict=True):
        if exponent > 0:
            parts.append(base + _typed_power(exponent))
    return " ".join(parts)


def _typed_power(exponent: Fraction) -> str:
    if exponent == 1:
        return ""
    if exponent.denominator == 1:
        return f"^{exponent}"
    return f"^{float(exponent)}" if exponent.denominator == 2 else f"^({exponent})"
