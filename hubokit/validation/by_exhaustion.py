"""Evidence by exhaustion: every state visited."""

from __future__ import annotations

from hubokit.errors import LimitError
from hubokit.validation.case import Case
from hubokit.validation.findings import Findings
from hubokit.validation.inversions import inversions_below
from hubokit.validation.judging import Judge, relation_of
from hubokit.validation.options import Options
from hubokit.validation.scaling import judge_scale
from hubokit.validation.tables import Tables, tables_by_blocks, tables_from_model, tables_from_polynomial


def by_exhaustion(case: Case, options: Options, found: Findings) -> None:
    """Settle every claim from tables over all states, or from a streamed comparison where these are too large."""
    try:
        tables = small_tables(case, found)
    except LimitError:
        _streamed(case, options, found)
        return
    _from_tables(case, options, found, tables)


def _from_tables(case: Case, options: Options, found: Findings, tables: Tables) -> None:
    """Every claim, the figures and the inversions from tables."""
    found.take_scale(judge_scale(case.declared, relation_of(tables)))
    judge = Judge(case, found, tables)
    judge.judge()
    judge.figures()
    found.evidence.append(
        {
            "kind": "exhaustion",
            "originals": len(case.originals),
            "account": tables.account,
        }
    )
    if found.refuted("energies"):
        found.inversions = inversions_below(judge, options.below)


def _streamed(case: Case, options: Options, found: Findings) -> None:
    """One pass of the engine; where it refuses, the minimum state by state, then ground levels alone."""
    from hubokit.validation.by_comparison import by_comparison
    from hubokit.validation.by_levels import by_enumeration

    if found.used("projection"):
        by_enumeration(case, options, found, "all states are too many to visit")
        return
    try:
        by_comparison(case, options, found)
    except LimitError as refusal:
        try:
            _from_tables(case, options, found, tables_by_blocks(case, options.time))
        except LimitError:
            by_enumeration(case, options, found, str(refusal))


def small_tables(case: Case, found: Findings) -> Tables:
    """Tables over all states: from P where projection gave it, else from the model itself.

    Raises
    ------
    LimitError
        When none of these is small enough.
    """
    polynomial = case.projection.polynomial if found.used("projection") else None
    if polynomial is not None:
        return tables_from_polynomial(case, polynomial)
    return tables_from_model(case)
