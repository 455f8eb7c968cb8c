"""reduce(): a quadratic model for any Hamiltonian."""

from __future__ import annotations

from fractions import Fraction
from typing import Any

from hubokit.errors import InputError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.numbers import Number, as_fraction, format_fraction
from hubokit.model.trail import Step, Trail
from hubokit.reduction.deductions import STEP
from hubokit.reduction.lifting import MODEL
from hubokit.reduction.planner import methods, planned, planned_for_ground_states
from hubokit.reduction.plans import Question
from hubokit.reduction.result import Reduction

KEEPS = ("ground-states", "energies", "one-to-one")
PREFERENCES = ("auxiliaries", "range", "couplers")
LARGEST_SEED = 2**53 - 1


def reduce(
    H: Hamiltonian,
    method: str = "auto",
    keep: str = "one-to-one",
    prefer: str = "auxiliaries",
    domain: str | None = None,
    auxiliary_gap: Number | None = None,
    seed: int = 0,
) -> Reduction:
    """Write a Hamiltonian as a quadratic one with auxiliaries.

    Parameters
    ----------
    H : Hamiltonian
    method : str
        ``"auto"``, or one of ``planner.methods()``. A family of gadgets serves every term that it can, and other
        terms get the gadget that is best for one term alone.
    keep : {"one-to-one", "energies", "ground-states"}
        What must survive: every energy with exactly one best auxiliary setting a state, every energy, or the set of
        ground states. The last allows steps without auxiliaries that change other energies (`deductions`), which
        method ``"auto"`` takes first where they make the model cheaper.
    prefer : {"auxiliaries", "range", "couplers"}
        What to have least of: auxiliaries, coefficient ratio, couplers.
    domain : {"spin", "boolean"}, optional
        Domain of the reduced model; default the source's. The model is reduced in the source's domain and then
        rewritten, so the prices of the plan are those before the change.
    auxiliary_gap : number, optional
        Least auxiliary gap asked for, in energy units. Default: the source's resolution for one-to-one, else 0 (ties
        between auxiliary settings are allowed).
    seed : int
        Seed of the searches that use chance, within 2^53 - 1, which the trail can hold.

    Returns
    -------
    Reduction

    Raises
    ------
    InputError
        An unknown word, a seed that is too large, a negative gap, a gap of 0 with one-to-one, or no Hamiltonian.
    LimitError
        A method that was named is beyond its work limit.

    Examples
    --------
    >>> R = reduce(Hamiltonian({("a", "b", "c"): -1}, "boolean"), keep="energies")
    >>> R.auxiliaries, str(R.model)
    (('y0',), '2 y0 - a y0 - b y0 - c y0')
    """
    if not isinstance(H, Hamiltonian):
        already = "; this one has been reduced, and .model is a Hamiltonian" if isinstance(H, Reduction) else ""
        raise InputError(f"a Hamiltonian is needed, not a {type(H).__name__}{already}")
    gap = _checked(H, keep, prefer, domain, auxiliary_gap)
    if method not in methods():
        raise InputError(f"no such reduction method: {method!r}; the methods are {', '.join(methods())}", "method")
    if abs(seed) > LARGEST_SEED:
        raise InputError(f"{seed} was given; seeds lie within 2**53 - 1", "seed")
    question = Question(H, keep, prefer, gap, seed)  # type: ignore[arg-type]
    start, steps = H, []
    if keep == "ground-states" and method == "auto":
        plan, found = planned_for_ground_states(question)
        if found is not None:
            start = found.model
            steps.append(Step(STEP, H.digest, parameters=found.record()))
    else:
        plan = planned(question, method)
    model, auxiliaries, made = plan.chosen.build()
    parameters: dict[str, Any] = {
        "keep": keep,
        "prefer": prefer,
        "auxiliary gap": format_fraction(gap),
        "seed": seed,
        **made,
        "plan": plan.as_json(),
    }
    steps.append(Step("reduction", start.digest, auxiliaries=auxiliaries, parameters=parameters))
    if domain is not None and domain != H.domain:
        # After the reduction, because a long product of one domain is 2^k products of the other.
        change = {"from": H.domain, "to": domain, "convention": H.convention}
        steps.append(Step("domain", model.digest, parameters=change))
        model = model.in_domain(domain)
    # Without a gap a common part has ties, and the rule might not give the first of the best.
    parts, pairs = "common parts" in made, isinstance(made.get("pair cover", {}).get("pairs"), list)
    if (parts and gap) or (pairs and not parts):
        parameters[MODEL] = model.digest
    trail = Trail(tuple(steps), source=H, source_digest=H.digest, keep=keep)
    return Reduction(H, model, auxiliaries, trail=trail)


def _checked(H: Hamiltonian, keep: str, prefer: str, domain: str | None, auxiliary_gap: Number | None) -> Fraction:
    """The auxiliary gap in energy units, after every word has been looked at."""
    for name, value, words in (
        ("keep", keep, KEEPS),
        ("prefer", prefer, PREFERENCES),
        ("domain", domain or H.domain, ("spin", "boolean")),
    ):
        if value not in words:
            raise InputError(f"{value!r} was given; it is one of {', '.join(words)}", name)
    if auxiliary_gap is None:
        return H.resolution if keep == "one-to-one" else Fraction(0)
    gap = as_fraction(auxiliary_gap, "auxiliary_gap")
    if gap < 0 or (gap == 0 and keep == "one-to-one"):
        raise InputError(f"{format_fraction(gap)} was given; it must be positive for {keep}", "auxiliary_gap")
    return gap
