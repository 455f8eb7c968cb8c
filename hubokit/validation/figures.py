"""The figures beside the claims."""

from __future__ import annotations

from fractions import Fraction

from hubokit.validation.case import Case
from hubokit.validation.evidence import Options
from hubokit.validation.findings import Findings
from hubokit.validation.verdict import Figure


def add_figures(case: Case, options: Options, found: Findings) -> None:
    """Costs of the model, and whatever gaps and ground levels are cheap enough."""
    costs = case.reduction.costs
    for name, value in (
        ("auxiliaries", costs.auxiliaries),
        ("fields", costs.fields),
        ("couplers", costs.couplers),
        ("couplers-per-variable", costs.couplers_per_variable),
        ("coefficient-ratio", costs.coefficient_ratio),
        ("field-bits", costs.field_bits),
        ("coupler-bits", costs.coupler_bits),
    ):
        found.figures[name] = Figure(Fraction(value))
