"""Whether a text says nothing: a source, a reason or a name that stands for one to come."""

from __future__ import annotations

import unicodedata

# Letters that fill a place and show nothing (Hangul fillers); every other blank or invisible sign is no letter.
INVISIBLE = frozenset("\u115f\u1160\u3164\uffa0")
NOTHING = frozenset(
    (
        "tbd",
        "tbc",
        "tba",
        "todo",
        "none",
        "na",
        "nil",
        "unknown",
        "assumed",
        "tobedetermined",
        "tobeconfirmed",
        "tobeannounced",
        "tobewritten",
        "tofollow",
        "later",
        "pending",
        "notknown",
        "notknownyet",
        "notstated",
        "noneyet",
        "nosource",
        "seeabove",
        "asabove",
    )
)


def is_empty(text: str) -> bool:
    """Whether a text has no letter or digit, or is a word for what is still to come."""
    plain = unicodedata.normalize("NFKC", text).casefold()
    signs = "".join(sign for sign in plain if sign.isalnum() and sign not in INVISIBLE)
    return not signs or signs in NOTHING
