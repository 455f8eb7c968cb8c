"""``hubokit project``: answers of a solver back in the variables of the source."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from pathlib import Path
from typing import Annotated, Any

import typer

from hubokit.cli import describing, options, summary
from hubokit.cli.loading import Elsewhere, load_reduction
from hubokit.cli.states_file import read_states
from hubokit.cli.text import count, fields, number, section, table
from hubokit.exchange.files import refuse_existing, write_text
from hubokit.model.numbers import format_fraction
from hubokit.model.states import change_domain
from hubokit.preparation.answers import Answers, answers_of
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
    answers = answers_of(reduction, given)
    if out is not None:
        write_text(out, answer_table(reduction.source.labels, answers), force=force)
    if as_json:
        summary.emit(summary.document("project", {"answers": answer_parts(reduction.source.labels, answers)}))
        return
    print(section(f"ANSWERS  {states}", _screen(reduction, answers)))


def answer_parts(labels: Sequence[str], answers: Answers) -> list[dict[str, Any]]:
    """Answers as the summary document has them."""
    return [
        {
            "state": dict(zip(labels, row, strict=True)),
            "source_energy": format_fraction(source),
            "model_energy": format_fraction(model),
            "auxiliaries_at_best": least is not None and model == least,
            "best_model_energy": None if least is None else format_fraction(least),
        }
        for row, source, model, least in zip(
            answers.states.tolist(),
            answers.source_energies,
            answers.model_energies,
            answers.best_energies,
            strict=True,
        )
    ]


def verdict_on(above: Fraction | None) -> str:
    """Whether auxiliaries are at their best, in words."""
    if above is None:
        return "not known"
    return "at their best" if above == 0 else f"{number(above)} above their best"


def answer_table(labels: Sequence[str], answers: Answers) -> str:
    """The answers as comma-separated values: the source's variables, then both energies and the auxiliaries."""
    import csv
    import io

    text = io.StringIO()
    rows = csv.writer(text, lineterminator="\n")
    rows.writerow([*labels, "source energy", "model energy", "auxiliaries"])
    for i, row in enumerate(answers.states.tolist()):
        source, model = answers.source_energies[i], answers.model_energies[i]
        rows.writerow([*row, format_fraction(source), format_fraction(model), verdict_on(answers.above_best(i))])
    return text.getvalue()


def _screen(reduction: Reduction, answers: Answers) -> str:
    source = reduction.source
    signs = describing.state_signs(answers.states[:SHOWN], source.domain)
    rows = [
        [
            str(i + 1),
            number(answers.source_energies[i]),
            number(answers.model_energies[i]),
            verdict_on(answers.above_best(i)),
            sign,
        ]
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
