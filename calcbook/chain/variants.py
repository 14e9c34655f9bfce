"""The same chain with other figures put in the place of some of its steps or inputs."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

import numpy as np

from calcbook.chain.types import Chain

Array = np.ndarray


def with_figures(
    chain: Chain, inputs: Mapping[str, Array], figures: Mapping[str, Array]
) -> tuple[Chain, dict[str, Array]]:
    """A chain and its inputs in which the ids of ``figures`` (inputs, open figures or early steps) are given.

    A step that gave such a figure is dropped, so that what follows from it takes the figure put in.
    """
    key = (with_figures, tuple(figures))
    one: Chain | None = chain.memory.get(key)
    if one is None:
        steps = tuple(step for step in chain.steps if step.id not in figures)
        open_figures = tuple(item for item in chain.open_figures if item.id not in figures)
        one = chain.memory[key] = replace(chain, steps=steps, open_figures=open_figures)
    return one, {**inputs, **figures}
