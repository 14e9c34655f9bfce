"""What a check of a fluid's state finds."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Literal

Level = Literal["fault", "open item", "note"]


@dataclass(frozen=True)
class Finding:
    """One finding: a stable code, how much it weighs, a sentence with the numbers, and the numbers (SI)."""

    code: str
    level: Level
    message: str
    figures: Mapping[str, float] = field(default_factory=dict)
