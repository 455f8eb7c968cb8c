"""check(): claims about a reduction, each proved, refuted, tested or left open, by evidence anyone can re-check."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from concurrent.futures import Executor
from importlib.metadata import PackageNotFoundError, version
from typing import Any

from hubokit.errors import InputError, LimitError
from hubokit.model.numbers import Number, as_fraction
from hubokit.reduction.result import Reduction
from hubokit.validation.case import Case
from hubokit.validation.claims import CLAIMS, asked_claims
from hubokit.validation.evidence import EVIDENCE, kinds_for
from hubokit.validation.figures import add_figures
from hubokit.validation.findings import Findings
from hubokit.validation.options import Options
from hubokit.validation.tables import MODEL_LIMIT, STATES_LIMIT
from hubokit.validation.verdict import Verdict

#: What may do where the other kinds of evidence, asked for by name, are too much.
INSTEAD = "evidence by projection may prove it at any size"


def check(
    reduction: Reduction,
    claims: str | Iterable[str] | None = None,
    evidence: str = "auto",
    radius: int | None = None,
    around: Any = None,
    executor: Executor | None = None,
    progress: Callable[[int, int], None] | None = None,
    time: float = 600.0,
    below: Number | None = None,
) -> Verdict:
    """Judge a reduction, made here or elsewhere.

    Parameters
    ----------
    reduction : Reduction
    claims : None, "all", a name or names
        None asks for what the trail says was kept, for all claims where there is no trail.
    evidence : "auto" | "projection" | "exhaustion" | "elimination" | "neighbourhood"
        "auto" tries them in this order until every asked claim is settled, with exhaustion or elimination,
        whichever is cheaper, and passes over what is too much. One that is named is refused where it is too
        much.
    radius : int, optional
        Hamming radius of the neighbourhood (default 2).
    around : states of the source, optional
        Its centres; by default states that a descent finds.
    executor, progress
        Handed to the engine that enumerates states.
    time : float
        Seconds that an enumeration may be predicted to take; above it the claim stays open.
    below : number, optional
        Order inversions of a refuted reduction are listed among source states with at most this energy; by
        default among the three lowest levels.

    Returns
    -------
    Verdict

    Raises
    ------
    InputError
        An unknown claim or kind of evidence, or no Reduction.
    LimitError
        The evidence named is too much for the models; the message says the size, the cost, and what would do.

    Examples
    --------
    >>> from hubokit.model.hamiltonian import Hamiltonian
    >>> E = Hamiltonian({("a", "b", "c"): -1}, "boolean")
    >>> F = Hamiltonian({("y",): 2, ("a", "y"): -1, ("b", "y"): -1, ("c", "y"): -1}, "boolean", ["a", "b", "c", "y"])
    >>> verdict = check(Reduction(E, F, ["y"]))
    >>> verdict.claims["energies"].status, verdict.claims["one-to-one"].status
    ('proved', 'refuted')
    """
    if not isinstance(reduction, Reduction):
        given = type(reduction).__name__
        raise InputError(f"a Reduction is needed, not a {given}; Reduction(source, model, auxiliaries) makes one")
    case, found = Case(reduction), Findings()
    kinds = kinds_for(evidence)
    options = Options(
        asked=asked_claims(claims, case.keep),
        evidence=evidence,
        radius=radius,
        around=around,
        below=None if below is None else as_fraction(below, "below"),
        executor=executor,
        progress=progress,
        time=time,
    )
    _inspect(case, found)
    for kind in kinds:
        if _enough(case, options, found):
            break
        try:
            EVIDENCE[kind](case, options, found)
        except LimitError as refusal:
            if options.named and not any(found.settled(name) for name in options.asked if name != "quadratic"):
                raise LimitError(f"{kind}: {refusal.message}; {INSTEAD}", "evidence") from None
            for name in options.asked:
                found.leave_open(name, f"{kind}: {refusal.message}")
    add_figures(case, options, found)
    return _verdict(case, options, found)


def _inspect(case: Case, found: Findings) -> None:
    locality = case.model.locality
    if locality <= 2:
        found.prove("quadratic", "inspection", f"locality {locality}")
    else:
        found.refute("quadratic", "inspection", f"locality {locality}")


def _enough(case: Case, options: Options, found: Findings) -> bool:
    """Whether every claim that matters is settled: the asked ones, and where all states are few the others too."""
    few = len(case.originals) <= STATES_LIMIT and (found.used("projection") or case.model.size <= MODEL_LIMIT)
    wanted = CLAIMS if few else options.asked
    return all(found.settled(name) for name in wanted)


def _verdict(case: Case, options: Options, found: Findings) -> Verdict:
    if not found.scale_known and case.declared is not None:
        found.scale, found.shift = case.declared
        found.scale_from = "declared"
    elif not found.scale_known:
        found.note("scale and shift were not sought over all states: 1 and 0 are taken")
    return Verdict(
        claims=found.in_order(options.asked),
        asked=options.asked,
        scale=found.scale,
        shift=found.shift,
        scale_from=found.scale_from,
        source_digest=case.source.digest,
        model_digest=case.model.digest,
        figures=found.figures,
        evenness=found.evenness,
        lost=found.lost,
        spurious=found.spurious,
        inversions=found.inversions,
        difference=found.difference,
        notes=tuple(found.notes),
        evidence=(_correspondence(case), *found.evidence),
        version=_version(),
    )


def _correspondence(case: Case) -> dict[str, Any]:
    """Which variables are auxiliaries and what each source variable became: what any second check begins with."""
    origin = case.reduction.origin
    written = None if origin is None else {label: _image(image) for label, image in origin.items()}
    return {"kind": "correspondence", "auxiliaries": list(case.auxiliaries), "origin": written}


def _image(image: Any) -> str | list[str] | int:
    if isinstance(image, str):
        return image
    return ["not", image[1]] if isinstance(image, tuple) else int(image)


def _version() -> str:
    try:
        return version("hubokit")
    except PackageNotFoundError:
        return "unreleased"
