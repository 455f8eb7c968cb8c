"""The program: one command a file, every error one line on standard error, the exit code decided here.

Exit codes: 0 done and, for a check, every asked claim proved; 1 an asked claim refuted; 2 bad input, usage, or work
refused before its start; 3 not decided; 70 a defect of hubokit itself; 130 interrupted;
141 the reader of the output has gone.
"""

from __future__ import annotations

import os
import sys
from collections.abc import Sequence
from typing import Annotated

import typer

from hubokit.cli import audit, check, convert, prepare, project, reduce, show, spectrum
from hubokit.cli.summary import made_by
from hubokit.cli.text import printable
from hubokit.errors import HubokitError

BAD_INPUT = 2
DEFECT = 70
INTERRUPTED = 130
PIPE_CLOSED = 141

app = typer.Typer(
    name="hubokit",
    help="Reduce a k-local Hamiltonian to quadratic form, prove that its ground states survive, and write the "
    "result to open formats.",
    add_completion=False,
    rich_markup_mode=None,
    pretty_exceptions_enable=False,
    context_settings={"help_option_names": ["-h", "--help"]},
)
for name, command, job in (
    ("prepare", prepare.command, "Reduce, check, write the verdict and every export."),
    ("show", show.command, "Say what is in a file."),
    ("reduce", reduce.command, "Reduce a model to quadratic form."),
    ("check", check.command, "Judge a reduction, claim by claim."),
    ("spectrum", spectrum.command, "Low levels, all levels, or states around given ones."),
    ("convert", convert.command, "Write a model in another format or domain."),
    ("project", project.command, "Bring a solver's answers back to the design."),
    ("audit", audit.command, "Check a verdict again by separate code."),
):
    app.command(name, short_help=job)(command)


def _version(asked: bool) -> None:
    if asked:
        typer.echo(made_by())
        raise typer.Exit()


@app.callback(invoke_without_command=True)
def _start(
    context: typer.Context,
    version: Annotated[
        bool, typer.Option("--version", callback=_version, is_eager=True, help="Print the version and leave.")
    ] = False,
) -> None:
    if context.invoked_subcommand is None:
        typer.echo(context.get_help())


def run(arguments: Sequence[str]) -> int:
    """Run one command line.

    Parameters
    ----------
    arguments : sequence of str
        What follows the program's name.

    Returns
    -------
    int
        The exit code.
    """
    try:
        code = app(args=list(arguments), prog_name="hubokit", standalone_mode=False)
        sys.stdout.flush()
        if code == INTERRUPTED:
            raise KeyboardInterrupt
        return code if isinstance(code, int) else 0
    except HubokitError as error:
        return _complain(str(error))
    except (KeyboardInterrupt, typer.Abort):
        return _complain("interrupted; nothing was left half-written", INTERRUPTED)
    except (BrokenPipeError, SystemExit):
        # The reader of the pipe has gone (typer leaves by SystemExit then); what is unwritten must not complain.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return PIPE_CLOSED
    except OSError as error:
        parts = (os.fsdecode(error.filename) if error.filename else "", error.strerror or str(error))
        return _complain(": ".join(part for part in parts if part))
    except MemoryError:
        return _complain("not enough memory for a model of this size")
    except Exception as error:
        usage = getattr(error, "format_message", None)
        if usage is not None:
            return _complain(
                f"{str(usage()).strip().rstrip('.')} (hubokit COMMAND --help lists what a command takes)"
            )
        if os.environ.get("HUBOKIT_TRACEBACK"):
            raise
        # Python's own exit code for a traceback is 1, which here would read as "refuted".
        return _complain(
            f"defect in hubokit: {type(error).__name__}: {error} (HUBOKIT_TRACEBACK=1 shows where)", DEFECT
        )


def _complain(message: str, code: int = BAD_INPUT) -> int:
    print(f"hubokit: {printable(' '.join(message.split()))}", file=sys.stderr)
    return code
