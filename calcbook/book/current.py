"""Whether a stored record or results file is what the calculation gives now.

Stored values may differ by 1e-9 (processors differ in the last place of a power) and versions of software
by their numbers; every other displayed fact must be the same.
"""

from __future__ import annotations

import json
import math
import re
from collections.abc import Iterator
from itertools import zip_longest

TOLERANCE = 1e-9
VERSION = re.compile(r"\b(calcbook|CoolProp)([ :|]+)\d+(\.\d+)+\w*")
SOFTWARE = "software"


def record_difference(stored: str, now: str) -> str:
    """The first line in which two records differ, in words; empty when they agree."""
    pairs = zip_longest(stored.splitlines(), now.splitlines(), fillvalue="")
    for number, (was, made) in enumerate(pairs, 1):
        if VERSION.sub(r"\1\2", was) != VERSION.sub(r"\1\2", made):
            return f"line {number}: stored `{_short(was)}`, now `{_short(made)}`"
    return ""


def results_difference(stored: str, now: str) -> str:
    """The first value in which two results files differ, in words; empty when they agree."""
    try:
        was = json.loads(stored)
    except ValueError:
        return "the stored file is no JSON"
    return next(_differences(was, json.loads(now), ""), "")


def _differences(was: object, now: object, where: str) -> Iterator[str]:
    if isinstance(was, dict) and isinstance(now, dict):
        for key in dict.fromkeys((*was, *now)):
            if where or key != SOFTWARE:
                yield from _differences(was.get(key), now.get(key), f"{where}/{key}")
    elif isinstance(was, list) and isinstance(now, list) and len(was) == len(now):
        for index, (one, other) in enumerate(zip(was, now, strict=True)):
            yield from _differences(one, other, f"{where}/{index}")
    elif isinstance(was, float | int) and isinstance(now, float | int) and not isinstance(was, bool):
        if not math.isclose(was, now, rel_tol=TOLERANCE, abs_tol=0.0):
            yield f"{where}: stored {was!r}, now {now!r}"
    elif was != now:
        yield f"{where}: stored {_short(str(was))}, now {_short(str(now))}"


def _short(text: str) -> str:
    return text if len(text) <= 80 else text[:79] + "…"
