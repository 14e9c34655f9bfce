"""The services that a calculation names, for its allowances and its U to be held against what is typical."""

from __future__ import annotations

from calcbook.calcfile import Calculation
from calcbook.faults import Collector, nearest_names, shown
from calcbook.library.plausibility import FOULING, OVERALL, typical


def check_services(calculation: Calculation, collector: Collector) -> None:
    """A service that no card of typical values knows is a fault (``service-unknown``)."""
    named = [
        (term.texts["service"], term.place_of("service"), FOULING)
        for term in calculation.resistances
        if "service" in term.texts
    ]
    report = calculation.report
    if report.service and report.service_place is not None:
        named.append((report.service, report.service_place, OVERALL))
    for service, place, quantity in named:
        known = typical(quantity)
        if service not in known:
            collector.add(
                "service-unknown",
                place,
                f"no card of typical values knows the service `{shown(service)}`",
                found=shown(service),
                expected="a service of `calcbook library allowances`",
                nearest=nearest_names(service, known),
            )
