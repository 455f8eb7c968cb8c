"""The claims of a check, what each implies, and the inference that carries a settled claim to the others.

With E the source, F the reduced model, P(x) = min over auxiliaries a of F(x, a) and m(x) the number of
settings that reach it, the claims are ordered by implication::

    one-to-one  =>  energies, even-multiplicity
    energies    =>  ground-energy, ground-states
    even-multiplicity  =>  ground-states

Read backwards, a refuted claim refutes every claim that implies it. Two conjunctions close the table:
`energies` and m = 1 at one state of an even model give nothing for all states, but `ground-states` proved
and one multiplicity for all states give `even-multiplicity`; such facts are evidence and live in the kinds
of evidence, not here.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from types import MappingProxyType
from typing import Literal, get_args

from hubokit.errors import InputError

ClaimName = Literal["quadratic", "ground-energy", "ground-states", "even-multiplicity", "energies", "one-to-one"]
Status = Literal["proved", "refuted", "tested", "open"]

#: Every claim, in the order in which a verdict prints them.
CLAIMS: tuple[str, ...] = get_args(ClaimName)

#: What a reduction may be asked to keep.
KEEPS: tuple[str, ...] = ("ground-states", "energies", "one-to-one")

#: claim -> the claims that follow from it (transitively closed).
IMPLIES: Mapping[str, tuple[str, ...]] = MappingProxyType(
    {
        "quadratic": (),
        "ground-energy": (),
        "ground-states": (),
        "even-multiplicity": ("ground-states",),
        "energies": ("ground-energy", "ground-states"),
        "one-to-one": ("energies", "even-multiplicity", "ground-energy", "ground-states"),
    }
)

MEANING: Mapping[str, str] = MappingProxyType(
    {
        "quadratic": "the reduced model's locality is at most 2",
        "ground-energy": "min P = alpha * min E + beta",
        "ground-states": "the states that minimise P are those that minimise E",
        "even-multiplicity": "ground-states, and every ground state has as many best auxiliary settings",
        "energies": "P(x) = alpha * E(x) + beta for every x",
        "one-to-one": "energies, and every x has one best auxiliary setting",
    }
)


def implied_by(name: str) -> tuple[str, ...]:
    """The claims from which `name` follows.

    Examples
    --------
    >>> implied_by("ground-states")
    ('even-multiplicity', 'energies', 'one-to-one')
    """
    return tuple(other for other in CLAIMS if name in IMPLIES[other])


def asked_claims(claims: str | Iterable[str] | None, keep: str | None) -> tuple[str, ...]:
    """The claims that a check answers for, `quadratic` first.

    Parameters
    ----------
    claims : None, "all", one name, or names
        None asks for what was kept, or for all claims where nothing is known to have been kept.
    keep : str or None
        What the trail says the reduction was asked to keep.

    Returns
    -------
    tuple of str
        In the order of `CLAIMS`, without repeats.

    Raises
    ------
    InputError
        When a name is not a claim.

    Examples
    --------
    >>> asked_claims(None, "energies")
    ('quadratic', 'energies')
    >>> len(asked_claims(None, None))
    6
    """
    if claims is None:
        claims = "all" if keep is None else (keep,)
    if isinstance(claims, str):
        claims = CLAIMS if claims == "all" else (claims,)
    wanted = set(claims)
    unknown = sorted(wanted.difference(CLAIMS))
    if unknown:
        raise InputError(f"no such claim: {unknown[0]!r}; claims are {', '.join(CLAIMS)}", place="claims")
    return tuple(name for name in CLAIMS if name == "quadratic" or name in wanted)
