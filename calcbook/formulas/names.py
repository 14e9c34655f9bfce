"""Typed names and their written form: ``mu_s`` and ``μ_s``. One table, read in both directions."""

from __future__ import annotations

_GREEK = {
    **{"rho": "ρ", "mu": "μ", "nu": "ν", "lam": "λ", "beta": "β", "eps": "ε", "eta": "η", "sigma": "σ"},
    **{"pi": "π", "theta": "θ", "phi": "φ", "delta": "δ", "psi": "ψ", "tau": "τ", "alpha": "α", "dT": "ΔT"},
}
_TYPED = {shown: typed for typed, shown in _GREEK.items()}


def written_name(name: str) -> str:
    """The trade's form of a typed name; only the part before the first ``_`` is turned to Greek."""
    if name == "g_n":
        return "g"
    first, bar, rest = name.partition("_")
    return _GREEK.get(first, first) + bar + rest


def typed_name(shown: str) -> str:
    """The inverse of ``written_name``."""
    if shown == "g":
        return "g_n"
    first, bar, rest = shown.partition("_")
    return _TYPED.get(first, first) + bar + rest
