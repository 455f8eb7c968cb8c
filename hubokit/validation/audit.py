"""A second, small checker of verdicts: plain integers and fractions, nothing of hubokit but its errors.

`audit` reads three JSON documents (verdict, source, reduced model) and trusts none of them. It recomputes
both digests, follows the certificate of a projection (audit_certificate.py), visits all states of a small
model by the definitions, re-evaluates every witness, and then says of each claim that the verdict calls
proved or refuted whether it agrees. What it cannot re-check it calls so; that counts as neither accepted nor
rejected.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction
from itertools import product
from typing import Any

from hubokit.errors import InputError
from hubokit.validation.audit_certificate import follow, multiplicity_at
from hubokit.validation.audit_models import Model, digest, rational, read_model, related, relation_of, scaled
from hubokit.validation.audit_polynomials import (
    Key,
    Poly,
    TooLarge,
    add,
    add_product,
    settings,
    tabulated,
    value_at,
    values_of,
)
from hubokit.validation.audit_proof import Proof, Rejected
from hubokit.validation.audit_report import AuditReport, Item

#: States, auxiliaries included, that are visited by brute force, and multiplications that this may take.
MOST_STATES, MOST_WORK = 2**16, 2**25
#: Variables up to which this is done for every setting of the auxiliaries rather than from a certificate.
SMALL = 12

CLAIMS = ("quadratic", "ground-energy", "ground-states", "even-multiplicity", "energies", "one-to-one")


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
        return _Audit(verdict, read_model(source), read_model(model), model.get("trail") or []).report()
    except TooLarge as limit:
        return AuditReport((Item("models", "not re-checked", str(limit)),))
    except (KeyError, IndexError, TypeError, ValueError, AttributeError, ZeroDivisionError, RecursionError) as fault:
        if isinstance(fault, InputError):
            raise
        raise InputError(f"a document is not of the expected form: {type(fault).__name__} {fault}") from None


class _Audit:
    """One verdict against its two models; `known` collects what is established, claim by claim."""

    def __init__(self, verdict: Mapping[str, Any], source: Model, model: Model, trail: Sequence[Any]) -> None:
        self.verdict, self.source, self.model, self.trail = verdict, source, model, trail
        self.items: list[Item] = []
        self.known: dict[str, bool] = {}
        self.why: dict[str, str] = {}
        self.limits: list[str] = []
        self.scale, self.shift = rational(verdict["scale"]), rational(verdict["shift"])
        first = next((piece for piece in verdict["evidence"] if piece["kind"] == "correspondence"), None)
        if first is None:
            raise InputError("the verdict does not say which variables are auxiliaries", "/evidence")
        self.origin: Mapping[str, Any] = first["origin"] or {}
        self.place = {label: position for position, label in enumerate(model.labels)}
        self.auxiliaries = sorted({self.place[label] for label in first["auxiliaries"]})
        inside = set(self.auxiliaries)
        self.originals = [position for position in range(len(model.labels)) if position not in inside]
        self.link = {label: self._linked(label) for label in source.labels}
        targets = [column for column, _, _ in self.link.values() if column is not None]
        if set(targets) != set(self.originals):
            raise InputError("the originals of the model are not those that the source's variables became")
        self.represents_all = len(targets) == len(set(targets)) == len(source.labels)

    def report(self) -> AuditReport:
        """Run every check and judge the claims."""
        self._digests()
        self.learn("quadratic", all(len(key) <= 2 for key in self.model.terms), "locality read off the terms")
        self._declared()
        self._projection()
        self._exhaustion()
        for name in CLAIMS:
            self._judge(name, self.verdict["claims"][name])
        return AuditReport(tuple(self.items))

    def note(self, name: str, good: bool, detail: str) -> None:
        """Add an item."""
        self.items.append(Item(name, "accepted" if good else "rejected", detail))

    def learn(self, name: str, value: bool, why: str) -> None:
        """Establish a claim, or its negation."""
        self.known.setdefault(name, value)
        self.why.setdefault(name, why)

    def _linked(self, label: str) -> tuple[int | None, Fraction, Fraction]:
        """A source variable as p + q * (model variable): its column (None: fixed), p and q."""
        image = self.origin.get(label, label)
        if not isinstance(image, (str, list)):
            if image not in values_of(self.source.domain):
                raise InputError(f"{label!r} is fixed at {image!r}", "/evidence")
            return None, Fraction(image), Fraction(0)
        p, q = Fraction(0), Fraction(1)
        if self.source.domain != self.model.domain:
            sign = -1 if self.model.convention == "1-2x" else 1
            p, q = (
                (Fraction(-sign), Fraction(2 * sign))
                if self.source.domain == "spin"
                else (
                    Fraction(1, 2),
                    Fraction(sign, 2),
                )
            )
        if isinstance(image, list):
            p, q, image = (-p, -q, image[1]) if self.source.domain == "spin" else (1 - p, -q, image[1])
        return self.place[image], p, q

    def _digests(self) -> None:
        for name, model in (("source", self.source), ("model", self.model)):
            good = digest(model) == self.verdict[f"{name}_digest"]
            self.note(f"{name} digest", good, "recomputed" if good else "the document is another function")

    def _declared(self) -> None:
        """Scale and shift against the trail of the reduced document, where it has one."""
        if self.scale <= 0:
            self.note("scale", False, "the scale is not positive")
        steps = list(self.trail[1:])
        first = self.trail[0] if self.trail else {}
        scale, shift = rational(first.get("scale", 1)), rational(first.get("shift", 0))
        if not steps and "scale" not in first and "shift" not in first:
            return
        for step in steps:
            scale, shift = scale * rational(step["scale"]), shift * rational(step["scale"]) + rational(step["shift"])
        good = (self.scale, self.shift) == (scale, shift) and self.verdict["scale_from"] == "declared"
        self.note("scale", good, "as the trail declares" if good else f"the trail declares {scale} and {shift}")

    def _energy(self) -> Poly:
        """E over the originals of the model, as a polynomial in positions of the model."""
        E: Poly = {}
        split = {i for i, label in enumerate(self.source.labels) if self.link[label][1] and self.link[label][2]}
        if sum(1 << min(len(split.intersection(key)), 60) for key in self.source.terms) > MOST_WORK:
            raise TooLarge("a source whose change of variables would expand too far")
        for key, weight in self.source.terms.items():
            term: Poly = {(): weight * self.source.resolution}
            for position in key:
                column, p, q = self.link[self.source.labels[position]]
                factor: Poly = {(): p} if p else {}
                if column is not None:
                    factor[(column,)] = q
                grown: Poly = {}
                add_product(grown, term, factor, self.model.domain)
                term = grown
            for one, value in term.items():
                add(E, one, value)
        add(E, (), self.source.constant)
        return E

    def _projection(self) -> None:
        for piece in self.verdict["evidence"]:
            if piece["kind"] != "projection":
                continue
            certificate = piece["certificate"]
            try:
                if list(certificate.get("auxiliaries", self.auxiliaries)) != self.auxiliaries:
                    raise Rejected("it speaks of other auxiliaries")
                size = len(self.model.labels)
                proof = follow(certificate, self.model.terms, self.model.domain, size, self.auxiliaries)
                stated = certificate["multiplicity"]
                if stated is not None and (proof.uneven or proof.unclear or stated != proof.multiplicity):
                    raise Rejected(f"the multiplicity is not {stated} everywhere")
                P: Poly = {key: value * self.model.resolution for key, value in proof.gained.items()}
                add(P, (), self.model.constant)
                E = self._energy()
            except Rejected as fault:
                self.note("projection", False, str(fault))
                continue
            except TooLarge as limit:
                self.limits.append(f"projection: {limit}")
                continue
            self.note("projection", True, f"every step repeated, P has {len(P)} terms")
            self._compare(P, E)
            self._multiplicity(proof, "the certificate")
            self._visited(P, E, proof)

    def _compare(self, P: Poly, E: Poly) -> None:
        """What P and E as polynomials say of the claims and of the scale."""
        why = "P and E compared term by term"
        found = related(P, E)
        same = {key: value for key, value in scaled(E, self.scale, self.shift).items() if value} == P
        self._scale(found, constant=not any(E))
        self.learn("energies", same and self.represents_all, why)
        if not self.represents_all:
            return
        if same:
            self.learn("ground-energy", True, why)
        if found is not None:
            self.learn("ground-states", True, why)
            if found[0] == self.scale or not any(E):
                self.learn("ground-energy", same, why)

    def _scale(self, found: tuple[Fraction, Fraction] | None, constant: bool) -> None:
        """A scale that was not declared is the one that holds everywhere, or 1 and 0."""
        sought = any(piece["kind"] in ("projection", "exhaustion") for piece in self.verdict["evidence"])
        if self.verdict["scale_from"] == "declared" or not sought:
            return
        wanted = (Fraction(1), Fraction(0)) if found is None else found
        origin = "default" if found is None else "found"
        good = (self.scale, self.shift) == wanted and self.verdict["scale_from"] == origin
        self.note("scale", good, "sought again" if good else f"{wanted[0]} and {wanted[1]} ({origin}) would be right")

    def _multiplicity(self, proof: Proof, why: str) -> None:
        uniform = None if proof.uneven or proof.unclear else proof.multiplicity
        if self.known.get("ground-states") and uniform is not None:
            self.learn("even-multiplicity", True, why)
        if not self.known["energies"]:
            self.learn("one-to-one", False, why)
        elif uniform is not None:
            self.learn("one-to-one", uniform == 1, why)
        else:
            witness = self.verdict["claims"]["one-to-one"]["witness"]
            if witness is not None and not proof.unclear:
                bits = self._bits(witness["state"])
                if bits is not None and multiplicity_at(proof, bits) != 1:
                    self.learn("one-to-one", False, f"{why}, at the witness")

    def _bits(self, state: Mapping[str, int]) -> dict[int, int] | None:
        """Bits of the originals by position for a source state, None where the model has no such state."""
        found: dict[int, int] = {}
        low = values_of(self.model.domain)[0]
        for label in self.source.labels:
            column, p, q = self.link[label]
            if state[label] not in values_of(self.source.domain):
                raise InputError(f"a witness gives {label!r} the value {state[label]!r}")
            if column is None:
                if p != state[label]:
                    return None
                continue
            bit = 0 if p + q * low == state[label] else 1
            if found.setdefault(column, bit) != bit:
                return None
        return found

    def _visited(self, P: Poly, E: Poly, proof: Proof) -> None:
        """Every claim by the definitions, from P and m as the certificate gives them, where the originals are few."""
        n = len(self.originals)
        if not self.represents_all or 2**n > MOST_STATES or len(self.auxiliaries) + n <= SMALL:
            return
        domain = self.model.domain
        E_all, P_all = (tabulated(poly, self.originals, domain) for poly in (E, P))
        states = list(settings(n))
        m: dict[Key, int] = {}
        if not proof.unclear:
            low_E, low_P = min(E_all), min(P_all)
            ground = [x for x, e, p in zip(states, E_all, P_all, strict=True) if e == low_E or p == low_P]
            if len(ground) * (len(proof.uneven) + len(proof.known)) <= MOST_WORK // 8:
                for x in ground:
                    m[x] = multiplicity_at(proof, dict(zip(self.originals, x, strict=True)))
        self._define(dict(zip(states, E_all, strict=True)), dict(zip(states, P_all, strict=True)), m)

    def _exhaustion(self) -> None:
        """Every claim by the definitions, where all states are few."""
        n, size = len(self.source.labels), len(self.model.labels)
        work = (len(self.model.terms) << size) + (len(self.source.terms) << n) if max(n, size) < 40 else MOST_WORK + 1
        if 2 ** min(size, 99) > MOST_STATES or 2 ** min(n, 99) > MOST_STATES or work > MOST_WORK:
            self.limits.append(f"exhaustion: 2^{size} settings of the model, {MOST_STATES} are visited")
            return
        E, P, m = {}, {}, {}
        bits_of = list(product(values_of(self.model.domain), repeat=len(self.auxiliaries)))
        low_high = values_of(self.model.domain)
        for state in product(values_of(self.source.domain), repeat=n):
            at = dict(zip(self.source.labels, state, strict=True))
            E[state] = self.source.energy(at)
            bits = self._bits(at)
            if bits is None:
                continue
            full = [0] * size
            for column, bit in bits.items():
                full[column] = low_high[bit]
            energies = []
            for setting in bits_of:
                for position, value in zip(self.auxiliaries, setting, strict=True):
                    full[position] = value
                energies.append(value_at(self.model.terms, full))
            least = min(energies)
            P[state], m[state] = self.model.constant + least * self.model.resolution, energies.count(least)
        self._define(E, P, m)

    def _define(self, E: dict[Key, Fraction], P: dict[Key, Fraction], m: dict[Key, int]) -> None:
        """The claims by their definitions; what the certificate gave must agree."""
        pairs = sorted({(E[x], P[x]) for x in P})
        found = relation_of(pairs)
        if not any(item.name == "scale" for item in self.items):
            self._scale(found, constant=pairs[0][0] == pairs[-1][0])
        low_E, low_P = min(E.values()), min(P.values())
        ground = {x for x in E if E[x] == low_E}
        states = ground == {x for x in P if P[x] == low_P}
        same = len(P) == len(E) and all(P[x] == self.scale * E[x] + self.shift for x in E)
        lowest = low_P == self.scale * low_E + self.shift
        truth = {"ground-energy": lowest, "ground-states": states, "energies": same}
        if not states or ground <= set(m):
            truth["even-multiplicity"] = states and len({m[x] for x in ground}) == 1
        if not same or len(m) == len(P):
            truth["one-to-one"] = same and set(m.values()) == {1}
        for name, value in truth.items():
            if self.known.get(name, value) != value:
                self.note(name, False, "the certificate and all states disagree")
            self.known[name], self.why[name] = value, f"all {len(E)} states visited"

    def _judge(self, name: str, claim: Mapping[str, Any]) -> None:
        """Accept or reject one claim, its witnesses first."""
        status = claim["status"]
        for kind in ("witness", "rival"):
            fault = self._witness(claim[kind]) if claim[kind] is not None else None
            if fault:
                self.note(name, False, f"{kind}: {fault}")
                return
        if status in ("open", "tested"):
            if status == "tested":
                self.items.append(Item(name, "not re-checked", "tested on some states; the verdict claims no more"))
            return
        if status not in ("proved", "refuted"):
            self.note(name, False, f"no such status: {str(status)[:20]}")
        elif name not in self.known and status == "refuted" and self._shown(name, claim):
            self.note(name, True, "refuted: the witness alone shows it")
        elif name not in self.known:
            self.items.append(
                Item(name, "not re-checked", "; ".join(self.limits) or "no evidence that is re-checked")
            )
        else:
            good = self.known[name] == (status == "proved")
            self.note(name, good, f"{status}: {self.why[name]}" if good else f"not so: {self.why[name]}")

    def _witness(self, witness: Mapping[str, Any]) -> str | None:
        """What is wrong with a witness: its energies are evaluated again."""
        state = witness["state"]
        if self.source.energy(state) != rational(witness["source_energy"]):
            return "E of the state is another"
        bits = self._bits(state)
        if (bits is None) != (witness["model_energy"] is None):
            return "whether the model has the state is told wrongly"
        if bits is None:
            return None
        values = values_of(self.model.domain)
        full = {self.model.labels[column]: values[bit] for column, bit in bits.items()}
        for position in self.auxiliaries:
            label = self.model.labels[position]
            if witness["auxiliaries"][label] not in values:
                return "an auxiliary has no value of the domain"
            full[label] = witness["auxiliaries"][label]
        if self.model.energy(full) != rational(witness["model_energy"]):
            return "F of the state is another"
        return None

    def _shown(self, name: str, claim: Mapping[str, Any]) -> bool:
        """Whether a witness refutes without any minimum: F(x, a) < alpha E(x) + beta, or no model state at all."""
        witness = claim["witness"]
        if name not in ("energies", "one-to-one") or witness is None:
            return False
        if witness["model_energy"] is None:
            return True
        bound = self.scale * rational(witness["source_energy"]) + self.shift
        return rational(witness["model_energy"]) < bound
