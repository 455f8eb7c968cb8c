"""``hubokit project``: answers of a solver back in the variables of the source."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from pathlib import Path
from typing import Annotated, Any

import numpy as np
import typer

from hubokit.cli import describing, options, summary
from hubokit.cli.loading import Elsewhere, load_reduction
from hubokit.cli.states_file import read_states
from hubokit.cli.text import count, fields, number, section, table
from hubokit.errors import LimitError
from hubokit.exchange.files import refuse_existing, write_text
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.numbers import format_fraction
from hubokit.model.states import change_domain
from hubokit.reduction.result import Reduction

SHOWN = 20


def command(
    reduced: options.Reduced,
    states: Annotated[Path, typer.Argument(metavar="STATES.csv", help="States of the reduced model.")],
    source: options.Source = None,
    auxiliaries: options.Auxiliaries = None,
    origin: options.OriginOption = None,
    domain: Annotated[
        options.Domain | None,
        typer.Option("--domain", help="Domain of the values in the table; by default that of the reduced model."),
    ] = None,
    out: Annotated[
        Path | None,
        typer.Option("--output", "-o", metavar="OUT.csv", help="Table of the source states and energies."),
    ] = None,
    force: options.Force = False,
    as_json: options.Json = False,
) -> None:
    """Bring states of a reduced model back to the source, with both energies and the state of the auxiliaries."""
    if out is not None:
        refuse_existing(out, force=force)
    reduction, _ = load_reduction(reduced, Elsewhere(source, auxiliaries, origin))
    model = reduction.model
    written = model.domain if domain is None else domain.value
    read = read_states(states, model.labels, written)
    given = change_domain(read, written, model.domain, model.convention)
    answers = reduction.project(given)
    before = exact(reduction.source, reduction.source.integer_energies(answers))
    after = exact(model, model.integer_energies(given))
    best = best_energies(reduction, given)
    if out is not None:
        write_text(out, answer_table(reduction.source.labels, answers, before, after, best), force=force)
    if as_json:
        summary.emit(summary.document("project", {"answers": answer_parts(reduction, answers, before, after, best)}))
        return
    print(section(f"ANSWERS  {states}", _screen(reduction, answers, before, after, best)))


def exact(model: Hamiltonian, whole: Sequence[int] | np.ndarray[Any, Any]) -> list[Fraction]:
    """Energies from whole numbers of the resolution."""
    return [model.constant + int(k) * model.resolution for k in whole]


def best_energies(reduction: Reduction, states: np.ndarray[Any, Any]) -> list[Fraction | None]:
    """Least energy that any setting of the auxiliaries reaches, for every state; None where that is too much work."""
    model = reduction.model
    columns = [model.positions[label] for label in reduction.projection.originals]
    try:
        energies, _, _ = reduction.projection.minimum(states[:, columns])
    except LimitError:
        return [None] * len(states)
    return list(exact(model, energies))


def answer_parts(
    reduction: Reduction,
    answers: np.ndarray[Any, Any],
    before: Sequence[Fraction],
    after: Sequence[Fraction],
    best: Sequence[Fraction | None],
) -> list[dict[str, Any]]:
    """Answers as the summary document has them."""
    labels = reduction.source.labels
    return [
        {
            "state": dict(zip(labels, row, strict=True)),
            "source_energy": format_fraction(source),
            "model_energy": format_fraction(model),
            "auxiliaries_at_best": least is not None and model == least,
            "best_model_energy": None if least is None else format_fraction(least),
        }
        for row, source, model, least in zip(answers.tolist(), before, after, best, strict=True)
    ]


def verdict_on(model: Fraction, least: Fraction | None) -> str:
    """Whether auxiliaries are at their best, in words."""
    if least is None:
        return "not known"
    return "at their best" if model == least else f"{number(model - least)} above their best"


def answer_table(
    labels: Sequence[str],
    answers: np.ndarray[Any, Any],
    before: Sequence[Fraction],
    after: Sequence[Fraction],
    best: Sequence[Fraction | None],
) -> str:
    """The answers as comma-separated values: the source's variables, then both energies and the auxiliaries."""
    import csv
    import io

    text = io.StringIO()
    rows = csv.writer(text, lineterminator="\n")
    rows.writerow([*labels, "source energy", "model energy", "auxiliaries"])
    for row, source, model, least in zip(answers.tolist(), before, after, best, strict=True):
        rows.writerow([*row, format_fraction(source), format_fraction(model), verdict_on(model, least)])
    return text.getvalue()


def _screen(
    reduction: Reduction,
    answers: np.ndarray[Any, Any],
    before: Sequence[Fraction],
    after: Sequence[Fraction],
    best: Sequence[Fraction | None],
) -> str:
    source = reduction.source
    signs = describing.state_signs(answers[:SHOWN], source.domain)
    rows = [
        [str(i + 1), number(before[i]), number(after[i]), verdict_on(after[i], best[i]), sign]
        for i, sign in enumerate(signs)
    ]
    more = len(answers) - len(rows)
    return "\n".join(
        [
            table(["answer", "source energy", "model energy", "auxiliaries", "source state"], rows, align="rrr"),
            *([f"  and {count(more, 'more answer')}; --json or --output gives them all"] if more else []),
            "",
            fields([("variables", " ".join(source.labels))]),
        ]
    )
