"""Which fluids there are, and under which names, known without the backend.

``names.json`` is made by ``python -m calcbook.properties.names`` from the backend's own list; a test
compares it with the backend installed. Mixtures are listed here, by what they are made of.
"""

from __future__ import annotations

import functools
import json
import re
from pathlib import Path
from typing import Any

from calcbook.faults import nearest_names
from calcbook.properties.backend import Code
from calcbook.properties.faults import PropertyFault

NAMES_FILE = Path(__file__).with_name("names.json")

# Words of the trade that the backend's own list lacks.
EVERYDAY = {"steam": "Water", "water vapour": "Water", "dry air": "Air"}

# The backend has these solutions on one basis or on both; the code names the data set. Lithium bromide
# is left out: its data set has no viscosity and no conductivity (it answers 1 and 0).
MIXTURES: dict[str, dict[str, str]] = {
    "ammonia + water": {"mass fraction": "MAM"},
    "calcium chloride + water": {"mass fraction": "MCA"},
    "ethanol + water": {"mass fraction": "MEA"},
    "ethylene glycol + water": {"mass fraction": "MEG", "volume fraction": "AEG"},
    "glycerol + water": {"mass fraction": "MGL"},
    "lithium chloride + water": {"mass fraction": "MLI"},
    "magnesium chloride + water": {"mass fraction": "MMG"},
    "methanol + water": {"mass fraction": "MMA"},
    "potassium acetate + water": {"mass fraction": "MKA"},
    "potassium carbonate + water": {"mass fraction": "MKC"},
    "potassium formate + water": {"mass fraction": "MKF"},
    "propylene glycol + water": {"mass fraction": "MPG", "volume fraction": "APG"},
    "sea salt + water": {"mass fraction": "MITSW"},
    "sodium chloride + water": {"mass fraction": "MNA"},
}

# Single liquids without a vapour side. The backend's sodium-potassium data set is left out: its density
# (1880 kg/m3) and conductivity (0.5 W/(m K)) are not those of the alloy.
LIQUIDS = {"liquid sodium": "LiqNa"}


def folded(name: str) -> str:
    """A name without case, blanks, hyphens and underlines, so that ``R-134a`` finds ``R134a``."""
    return re.sub(r"[^a-z0-9()]", "", name.casefold())


def fluid_names() -> tuple[str, ...]:
    """The names of the pure fluids and single liquids, sorted; each has further aliases."""
    return tuple(sorted((*_names()["fluids"], *LIQUIDS), key=str.casefold))


def mixture_names() -> tuple[str, ...]:
    """The names of the mixtures, sorted."""
    return tuple(MIXTURES)


def pure_code(name: str) -> tuple[str, Code]:
    """The fluid's own name and the backend's code for a name or alias, in any case."""
    wanted = folded(name)
    for liquid, code in LIQUIDS.items():
        if folded(liquid) == wanted:
            return liquid, Code("INCOMP", code)
    own = _by_folded().get(wanted)
    if own is None:
        choices = (*fluid_names(), *EVERYDAY, *MIXTURES)
        raise PropertyFault(
            "fluid-unknown",
            f"no fluid is called {name!r}",
            "the name of a pure fluid, a mixture, a table or stated constants",
            nearest_names(name, choices),
        )
    return own, Code("HEOS", own)


def mixture_code(name: str, basis: str, fraction: float) -> tuple[str, Code]:
    """The mixture's own name and the backend's code; the basis and the range of fractions are checked."""
    own = {folded(each): each for each in MIXTURES}.get(folded(name))
    if own is None:
        raise PropertyFault(
            "fluid-unknown",
            f"no mixture is called {name!r}",
            "the name of a mixture, such as 'ethylene glycol + water'",
            nearest_names(name, MIXTURES),
        )
    codes = MIXTURES[own]
    if basis not in codes:
        raise PropertyFault(
            "mixture-basis",
            f"{own} is not known by {basis!r}",
            " or ".join(codes),
            nearest_names(basis, codes) or tuple(codes),
        )
    low, high = _names()["fractions"][codes[basis]]
    if not low <= fraction <= high:
        raise PropertyFault(
            "fraction-outside",
            f"{basis} {fraction:.6g} of {own} is outside the data, {low:.6g} to {high:.6g}",
            f"a {basis} from {low:.6g} to {high:.6g}",
        )
    return own, Code("INCOMP", codes[basis], basis, float(fraction))


@functools.cache
def _names() -> dict[str, Any]:
    names: dict[str, Any] = json.loads(NAMES_FILE.read_text(encoding="utf-8"))
    return names


@functools.cache
def _by_folded() -> dict[str, str]:
    found = {folded(alias): own for own, aliases in _names()["fluids"].items() for alias in aliases}
    found |= {folded(alias): own for alias, own in EVERYDAY.items()}
    return found | {folded(own): own for own in _names()["fluids"]}


def from_backend() -> dict[str, Any]:
    """The content of ``names.json`` as the backend installed has it.

    An alias that two fluids claim (pieces of chemical names cut at their commas) or that has one
    character is nobody's.
    """
    import CoolProp.CoolProp as coolprop

    owners: dict[str, set[str]] = {}
    written: dict[str, str] = {}
    fluids = sorted(coolprop.get_global_param_string("fluids_list").split(","))
    for own in fluids:
        for alias in (own, *coolprop.get_fluid_param_string(own, "aliases").split(",")):
            owners.setdefault(folded(alias), set()).add(own)
            written.setdefault(folded(alias), alias.strip())
    names: dict[str, list[str]] = {own: [] for own in fluids}
    for short in sorted(owners):
        owner = min(owners[short])
        if len(short) > 1 and len(owners[short]) == 1 and short != folded(owner):
            names[owner].append(written[short])
    fractions = {}
    for code in sorted(each for codes in MIXTURES.values() for each in codes.values()):
        state = coolprop.AbstractState("INCOMP", code)
        fractions[code] = [
            float(state.trivial_keyed_output(coolprop.ifraction_min)),
            float(state.trivial_keyed_output(coolprop.ifraction_max)),
        ]
    return {"fluids": names, "fractions": fractions}


def as_text(names: dict[str, Any]) -> str:
    """The text of ``names.json``: one fluid or mixture per line."""
    parts = []
    for title in ("fluids", "fractions"):
        rows = [f"  {json.dumps(name)}: {json.dumps(entry)}" for name, entry in names[title].items()]
        parts.append(f'"{title}": {{\n' + ",\n".join(rows) + "\n}")
    return "{" + ",\n".join(parts) + "}\n"


if __name__ == "__main__":
    NAMES_FILE.write_text(as_text(from_backend()), encoding="utf-8")
