"""A second, small checker of verdicts: plain integers and fractions, nothing of hubokit but its errors.

`audit` reads three JSON documents (verdict, source, reduced model) and trusts none of them. It recomputes both
digests, repeats the certificate of a projection (audit_certificate.py), visits all states of a small model by
the definitions, evaluates every witness, and then says of each claim whether it agrees. What it cannot re-check
it calls so; that is neither accepted nor rejected. The figures beside the claims are not looked at.

With E the source, F the reduced model on originals x and auxiliaries a, P(x) = min over a of F(x, a), and m(x)
the number of settings that reach it, the claims are:

ground-energy       min P = scale * min E + shift
ground-states       the states that minimise P are those that minimise E
even-multiplicity   ground-states, and m is the same at all of them
energies            P = scale * E + shift at every state
one-to-one          energies, and m = 1 at every state
quadratic           no product of F has more than two variables
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from itertools import product
from typing import Any

from hubokit.errors import InputError
from hubokit.validation.audit_arithmetic import Key, Poly, TooLarge, add, times, value_at, values_of
from hubokit.validation.audit_certificate import Proof, Rejected, follow
from hubokit.validation.audit_models import Model, digest, rational, read_model

#: Variables of which all states are visited, and products that this may evaluate.
MOST_VARIABLES, MOST_PRODUCTS = 16, 2**25

CLAIMS = ("quadratic", "ground-energy", "ground-states", "even-multiplicity", "energies", "one-to-one")


@dataclass(frozen=True)
class Item:
    """One thing looked at: `result` is "accepted", "rejected" or "not re-checked"."""

    name: str
    result: str
    detail: str


@dataclass(frozen=True)
class AuditReport:
    """What the audit came to."""

    items: tuple[Item, ...]

    @property
    def rejected(self) -> bool:
        """Whether anything was found wrong."""
        return any(item.result == "rejected" for item in self.items)

    @property
    def accepted(self) -> bool:
        """Whether every claim that the verdict settles was re-checked and found right."""
        return all(item.result == "accepted" for item in self.items)

    @property
    def exit_code(self) -> int:
        """0 all accepted, 1 something rejected, 3 something not re-checked."""
        return 1 if self.rejected else 0 if self.accepted else 3

    def __str__(self) -> str:
        return "\n".join(f"{item.name:<18} {item.result:<15} {item.detail}".rstrip() for item in self.items)


def audit(verdict: Mapping[str, Any], source: Mapping[str, Any], model: Mapping[str, Any]) -> AuditReport:
    """Check a verdict again.

    Parameters
    ----------
    verdict, source, model : mappings
        JSON documents as read.

    Returns
    -------
    AuditReport

    Raises
    ------
    InputError
        A document lacks a field or holds a wrong type.
    """
    try:
        E, F, items = read_model(source), read_model(model), []
        for name, one in (("source digest", E), ("model digest", F)):
            good = digest(one) == verdict[name.replace(" ", "_")]
            items.append(Item(name, *(_ACCEPTED if good else ("rejected", "the document holds another function"))))
        if all(item.result == "accepted" for item in items):
            items += _Audit(verdict, E, F, model.get("trail") or []).items
        return AuditReport(tuple(items))
    except TooLarge as limit:
        return AuditReport((Item("models", "not re-checked", str(limit)),))
    except (ArithmeticError, AttributeError, LookupError, RecursionError, TypeError, ValueError) as fault:
        if isinstance(fault, InputError):
            raise
        raise InputError(f"a document is not of the expected form: {type(fault).__name__} {fault}") from None


_ACCEPTED = ("accepted", "recomputed")


class _Audit:
    """One verdict against its two models; `known` collects what is established, claim by claim, and how."""

    def __init__(self, verdict: Mapping[str, Any], source: Model, model: Model, trail: Any) -> None:
        self.verdict, self.source, self.model = verdict, source, model
        self.items: list[Item] = []
        self.known: dict[str, tuple[bool, str]] = {}
        self.limits: list[str] = []
        self.scale, self.shift = rational(verdict["scale"]), rational(verdict["shift"])
        self.evidence: list[Mapping[str, Any]] = list(verdict["evidence"])
        kinds = {piece["kind"] for piece in self.evidence}
        self.sought = verdict["scale_from"] != "declared" and not kinds.isdisjoint(("projection", "exhaustion"))
        self._correspond()
        self._declared(trail)
        self.learn("quadratic", all(len(key) <= 2 for key in model.terms), "locality read off the terms")
        pieces = [piece for piece in self.evidence if piece["kind"] == "projection"]
        proofs = [proof for piece in pieces for proof in self._repeated(piece)]
        if any(self.open(name) for name in CLAIMS) or self.sought:
            self._visit(proofs[0] if proofs else None)
        if self.sought:
            self.items.append(Item("scale", "not re-checked", "whether another holds everywhere was not found out"))
        if set(verdict["claims"]) != set(CLAIMS):
            raise InputError(f"the claims are not {', '.join(CLAIMS)}", "/claims")
        for name in CLAIMS:
            self._judge(name, verdict["claims"][name])

    def note(self, name: str, good: bool, detail: str) -> None:
        """Add an item."""
        self.items.append(Item(name, "accepted" if good else "rejected", detail))

    def learn(self, name: str, value: bool, why: str) -> None:
        """Establish a claim, or its negation; two ways must agree."""
        if self.known.setdefault(name, (value, why))[0] != value:
            self.note(name, False, f"{self.known[name][1]} and {why} disagree")

    def open(self, name: str) -> bool:
        """Whether the verdict settles a claim that is not established so far."""
        return name not in self.known and self.verdict["claims"][name]["status"] in ("proved", "refuted")

    # --- which variable is which ---

    def _correspond(self) -> None:
        first = next((piece for piece in self.evidence if piece["kind"] == "correspondence"), None)
        if first is None:
            raise InputError("the verdict does not say which variables are auxiliaries", "/evidence")
        self.place = {label: position for position, label in enumerate(self.model.labels)}
        self.auxiliaries = sorted({self.place[label] for label in first["auxiliaries"]})
        originals = set(range(len(self.place))).difference(self.auxiliaries)
        self.link = {label: self._linked((first["origin"] or {}).get(label, label)) for label in self.source.labels}
        columns = [column for column, _, _ in self.link.values() if column is not None]
        if set(columns) != originals:
            raise InputError("the originals of the model are not those that the source's variables became")
        #: Whether every source state is a state of the model: no variable fixed, no two merged.
        self.whole = len(columns) == len(originals) == len(self.link)

    def _linked(self, image: Any) -> tuple[int | None, Fraction, Fraction]:
        """A source variable as p + q * (model variable): that one's position (None: fixed), p and q."""
        spin = self.source.domain == "spin"
        if type(image) is int and image in values_of(self.source.domain):
            return None, Fraction(image), Fraction(0)
        p, q = Fraction(0), Fraction(1)
        if self.source.domain != self.model.domain:
            sign = -1 if self.model.convention == "1-2x" else 1
            p, q = (Fraction(-sign), Fraction(2 * sign)) if spin else (Fraction(1, 2), Fraction(sign, 2))
        if isinstance(image, list) and image[:1] == ["not"]:
            (_, image), p, q = image, (0 if spin else 1) - p, -q
        return self.place[image], p, q

    def _bits(self, state: Mapping[str, Any]) -> dict[int, int] | None:
        """Bits of the originals for a source state, None where the model has no such state."""
        found: dict[int, int] = {}
        low = values_of(self.model.domain)[0]
        for label, (column, p, q) in self.link.items():
            value = self.source.value(state, label)
            bit = int(p + q * low != value)
            if found.setdefault(-1 if column is None else column, 0 if column is None else bit) != bit:
                return None
        found.pop(-1, None)
        return found

    # --- scale and shift ---

    def _declared(self, trail: Any) -> None:
        """Scale and shift against the trail of the reduced document, where it declares them."""
        if self.scale <= 0:
            self.note("scale", False, "the scale is not positive")
        scale, shift = Fraction(1), Fraction(0)
        for step in trail:
            factor = rational(step.get("scale", 1))
            scale, shift = scale * factor, shift * factor + rational(step.get("shift", 0))
        if any("scale" in step or "shift" in step for step in trail):
            good = (self.scale, self.shift) == (scale, shift) and self.verdict["scale_from"] == "declared"
            self.note("scale", good, "as the trail declares" if good else f"the trail declares {scale} and {shift}")

    def _scale(self, alpha: Fraction | None, energy: Any, level: Any) -> None:
        """A scale that was not declared is the one that holds everywhere, or 1 and 0."""
        if not self.sought:
            return
        self.sought = False
        wanted, origin = ((1, 0), "default") if alpha is None else ((alpha, level - alpha * energy), "found")
        good = (self.scale, self.shift) == wanted and self.verdict["scale_from"] == origin
        self.note("scale", good, "sought again" if good else f"{wanted[0]} and {wanted[1]} ({origin}) would be right")

    # --- the certificate ---

    def _energy(self) -> Poly:
        """E over the originals of the model, as a polynomial in their positions."""
        E: Poly = {(): self.source.constant}
        split = {label for label, (_, p, q) in self.link.items() if p and q}
        sizes = (sum(self.source.labels[i] in split for i in key) for key in self.source.terms)
        if sum(2 ** min(size, 60) for size in sizes) > MOST_PRODUCTS:
            raise TooLarge("a source whose change of variables would expand too far")
        for key, weight in self.source.terms.items():
            term: Poly = {(): weight * self.source.resolution}
            for position in key:
                column, p, q = self.link[self.source.labels[position]]
                term = times(term, {(): p} if column is None else {(): p, (column,): q}, self.model.domain)
            for one, value in term.items():
                add(E, one, value)
        return {key: value for key, value in E.items() if value}

    def _repeated(self, piece: Mapping[str, Any]) -> list[Proof]:
        """Repeat a certificate, and compare its P with E."""
        certificate, model = piece["certificate"], self.model
        try:
            if list(certificate.get("auxiliaries", self.auxiliaries)) != self.auxiliaries:
                raise Rejected("it speaks of other auxiliaries")
            proof = follow(certificate, model.terms, model.domain, len(model.labels), self.auxiliaries)
            uniform = None if proof.uneven or proof.unclear else proof.multiplicity
            if certificate["multiplicity"] not in (None, uniform):
                raise Rejected(f"the multiplicity is not {certificate['multiplicity']} everywhere")
            P, E = {key: value * model.resolution for key, value in proof.gained.items()}, self._energy()
        except Rejected as fault:
            self.note("projection", False, str(fault))
            return []
        except TooLarge as limit:
            self.limits.append(f"projection: {limit}")
            return []
        add(P, (), model.constant)
        self.note("projection", True, f"every step repeated, P has {len(P)} terms")
        alpha = _ratio([(E.get(key, 0), P.get(key, 0)) for key in E.keys() | P.keys() if key])
        energy, level, why = E.get((), 0), P.get((), 0), "P and E compared term by term"
        self._scale(alpha, energy, level)
        flat = not any(E)  # then any scale does
        same = alpha is not None and (flat or alpha == self.scale) and level == self.scale * energy + self.shift
        self.learn("energies", same and self.whole, why)
        if self.whole and alpha is not None:
            self.learn("ground-states", True, why)
            if flat or alpha == self.scale:
                self.learn("ground-energy", same, why)
            if uniform is not None:
                self.learn("even-multiplicity", True, "m is the same everywhere by the certificate")
        witness = self.verdict["claims"]["one-to-one"]["witness"]
        bits = self._bits(witness["state"]) if witness is not None and not proof.unclear else None
        if not self.known["energies"][0] or uniform is not None:
            self.learn("one-to-one", self.known["energies"][0] and uniform == 1, "the certificate")
        elif bits is not None and proof.multiplicity_at(bits) != 1:
            self.learn("one-to-one", False, "m at the witness, by the certificate")
        return [proof]

    # --- the definitions ---

    def _visit(self, proof: Proof | None) -> None:
        """Every claim by its definition, where all states are few; P by brute force, or from the certificate."""
        model, n, size = self.model, len(self.source.labels), len(self.model.labels)
        direct = size <= MOST_VARIABLES and (len(model.terms) << size) <= MOST_PRODUCTS
        P_terms: Poly = model.terms if proof is None else proof.gained
        much = n > MOST_VARIABLES or (len(self.source.terms) + len(P_terms) << n) > MOST_PRODUCTS
        if much or not (direct or proof):
            self.limits.append(f"exhaustion: 2^{size} settings of the model; those of {MOST_VARIABLES} are visited")
            return
        E: dict[Key, Fraction] = {}
        P: dict[Key, Fraction] = {}
        m: dict[Key, int] = {}
        bits_of: dict[Key, dict[int, int]] = {}
        values, full = values_of(model.domain), [0] * size
        for state in product(values_of(self.source.domain), repeat=n):
            E[state] = self.source.constant + self.source.resolution * value_at(self.source.terms, state)
            bits = self._bits(dict(zip(self.source.labels, state, strict=True)))
            if bits is None:
                continue
            bits_of[state] = bits
            for column, bit in bits.items():
                full[column] = values[bit]
            energies = []
            for setting in product(values, repeat=len(self.auxiliaries)) if direct else [()]:
                for position, value in zip(self.auxiliaries, setting, strict=direct):
                    full[position] = value
                energies.append(value_at(model.terms if direct else P_terms, full))
            P[state] = model.constant + model.resolution * min(energies)
            m[state] = energies.count(min(energies)) if direct else 0
        first, low_E, low_P = next(iter(P)), min(E.values()), min(P.values())
        self._scale(_ratio([(E[x] - E[first], P[x] - P[first]) for x in P]), E[first], P[first])
        ground, why = [x for x in E if E[x] == low_E], f"all {len(E)} states visited"
        states = ground == [x for x in E if P.get(x) == low_P]
        same = len(P) == len(E) and all(P[x] == self.scale * E[x] + self.shift for x in E)
        self.learn("ground-energy", low_P == self.scale * low_E + self.shift, why)
        self.learn("ground-states", states, why)
        self.learn("energies", same, why)
        if not same or direct:
            self.learn("one-to-one", same and set(m.values()) == {1}, why)
        if direct or not states:
            self.learn("even-multiplicity", states and len({m[x] for x in ground}) == 1, why)
        elif proof is not None and not proof.unclear and len(ground) * (len(proof.rules) + 1) <= MOST_PRODUCTS >> 3:
            counts = {proof.multiplicity_at(bits_of[x]) for x in ground}
            self.learn("even-multiplicity", len(counts) == 1, f"{why}, m by the certificate")

    # --- the verdict ---

    def _judge(self, name: str, claim: Mapping[str, Any]) -> None:
        """Accept or reject one claim, its witnesses first."""
        status = claim["status"]
        faults = [self._witness(claim[kind]) for kind in ("witness", "rival") if claim[kind] is not None]
        if any(faults):
            self.note(name, False, f"the witness is wrong: {'; '.join(filter(None, faults))}")
        elif status == "tested":
            self.items.append(Item(name, "not re-checked", "tested on some states; the verdict claims no more"))
        elif status not in ("proved", "refuted", "open"):
            self.note(name, False, f"no such status: {str(status)[:20]}")
        elif name in self.known and status != "open":
            value, why = self.known[name]
            good = value == (status == "proved")
            self.note(name, good, f"{status}: {why}" if good else f"not so: {why}")
        elif status == "refuted" and self._shown(name, claim["witness"]):
            self.note(name, True, "refuted: the witness alone shows it")
        elif status != "open":
            self.items.append(Item(name, "not re-checked", "; ".join(self.limits) or "no evidence to repeat"))

    def _witness(self, witness: Mapping[str, Any]) -> str | None:
        """What is wrong with a witness: its energies are evaluated again."""
        x = [self.source.value(witness["state"], label) for label in self.source.labels]
        E = self.source.constant + self.source.resolution * value_at(self.source.terms, x)
        if rational(witness["source_energy"]) != E:
            return f"E of the state is {E}"
        bits = self._bits(witness["state"])
        if bits is None or witness["model_energy"] is None:
            return None if bits is witness["model_energy"] else "whether the model has the state is told wrongly"
        full = [values_of(self.model.domain)[bits.get(position, 0)] for position in range(len(self.model.labels))]
        for position in self.auxiliaries:
            full[position] = self.model.value(witness["auxiliaries"], self.model.labels[position])
        F = self.model.constant + self.model.resolution * value_at(self.model.terms, full)
        return None if rational(witness["model_energy"]) == F else f"F of the state is {F}"

    def _shown(self, name: str, witness: Mapping[str, Any] | None) -> bool:
        """Whether a witness refutes without any minimum: F(x, a) < scale E(x) + shift, or no model state at all."""
        if name not in ("energies", "one-to-one") or witness is None:
            return False
        bound = self.scale * rational(witness["source_energy"]) + self.shift
        certain = self.verdict["scale_from"] == "declared" or Item("scale", "accepted", "sought again") in self.items
        return witness["model_energy"] is None or (certain and rational(witness["model_energy"]) < bound)


def _ratio(pairs: list[tuple[Any, Any]]) -> Fraction | None:
    """The alpha > 0 with ``second = alpha * first`` for all pairs; 1 where all are 0."""
    alpha = next((Fraction(second) / first for first, second in pairs if first), Fraction(1))
    return alpha if alpha > 0 and all(second == alpha * first for first, second in pairs) else None
