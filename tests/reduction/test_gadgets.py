"""Every gadget family is its term: the minimum over the auxiliaries, enumerated for every size it claims."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest

from hubokit.errors import InputError
from hubokit.reduction.gadgets.attach import TermPiece, shared_resolution
from hubokit.reduction.gadgets.base import Domain, StandIn
from hubokit.reduction.gadgets.enumeration import all_values, enumerated
from hubokit.reduction.gadgets.spin_product import spin_product
from hubokit.reduction.gadgets.table import FAMILIES, families_for, family, mirror_stand_in, stand_in, wide_stand_in

LARGEST = {
    "negative-monomial": 12,
    "positive-logarithmic": 12,
    "positive-monomial": 9,
    "flipped-literals": 8,
    "spin-product": 16,
    "spin-product-balanced": 9,
    "spin-split": 8,
}
CASES = [
    (one.name, locality, sign)
    for one in FAMILIES
    for locality in range(3, LARGEST[one.name] + 1)
    for sign in (-1, 1)
    if one.applies(locality, sign)
]


def domain_of(name: str) -> Domain:
    return family(name).domain


def products(locality: int, domain: Domain) -> list[int]:
    """The product of all members in every state."""
    return np.prod(all_values(locality, domain), axis=1).tolist()


@pytest.mark.parametrize(("name", "locality", "sign"), CASES)
def test_minimum_over_auxiliaries_is_the_term(name: str, locality: int, sign: int) -> None:
    part = stand_in(name, locality, sign, "one-to-one")
    for size, gap in ((1, 0), (Fraction(3, 2), Fraction(1, 3))):
        seen = enumerated(part, size, gap, domain_of(name))
        assert seen.minima == [sign * size * value for value in products(locality, domain_of(name))]


@pytest.mark.parametrize(("name", "locality", "sign"), CASES)
def test_with_a_gap_asked_for_every_state_keeps_one_best_setting_and_the_gap_is_there(
    name: str, locality: int, sign: int
) -> None:
    part = stand_in(name, locality, sign, "one-to-one")
    assert part.tie_free
    for size, gap in ((1, 1), (3, Fraction(1, 3))):
        seen = enumerated(part, size, gap, domain_of(name))
        assert set(seen.multiplicities) == {1}
        assert seen.gap is not None
        assert seen.gap >= gap


@pytest.mark.parametrize(("name", "locality", "sign"), [case for case in CASES if case[1] <= 6])
def test_terms_lighter_than_the_gap_are_widened_and_reach_it(name: str, locality: int, sign: int) -> None:
    part = wide_stand_in(name, locality, sign, "one-to-one")
    seen = enumerated(part, 1, Fraction(5, 2), domain_of(name))
    assert seen.minima == [sign * value for value in products(locality, domain_of(name))]
    assert set(seen.multiplicities) == {1}
    assert seen.gap is not None
    assert seen.gap >= Fraction(5, 2)


@pytest.mark.parametrize("locality", [3, 5, 7, 9])
@pytest.mark.parametrize("sign", [-1, 1])
def test_a_mirrored_product_of_spins_is_the_same_term_with_opposite_fields(locality: int, sign: int) -> None:
    own = stand_in("spin-product-balanced", locality, sign, "one-to-one")
    mirror = mirror_stand_in("spin-product-balanced", locality, sign, "one-to-one")
    assert mirror is not None
    seen = enumerated(mirror, 2, 1, "spin")
    assert seen.minima == [2 * sign * value for value in products(locality, "spin")]
    assert set(seen.multiplicities) == {1}
    fields = [part.coefficients(Fraction(2), Fraction(1))[(0,)] for part in (own, mirror)]
    assert fields[0] == -fields[1] != 0


def test_without_a_gap_the_published_forms_have_the_published_ties() -> None:
    ties = {
        (name, locality): set(
            enumerated(stand_in(name, locality, sign, "energies"), 1, 0, domain_of(name)).multiplicities
        )
        for name, locality, sign in CASES
        if locality <= 7
    }
    assert all(ties["negative-monomial", d] == {1, 2} for d in range(3, 8))
    assert all(ties["positive-monomial", d] == ({1, 2} if d % 2 else {1}) for d in range(3, 8))
    assert all(ties["positive-logarithmic", d] == {1} for d in range(3, 8))
    assert all(ties["spin-product", k] == {1, 2} for k in range(3, 8))


@pytest.mark.parametrize("locality", range(3, 17))
def test_a_product_of_k_spins_takes_ceil_log2_k_minus_one_auxiliaries(locality: int) -> None:
    count = next(bits for bits in range(6) if 2**bits >= locality) - 1
    assert {spin_product(locality, sign).auxiliaries for sign in (-1, 1)} == {count}


@pytest.mark.parametrize("locality", range(3, 17))
def test_a_positive_monomial_takes_ceil_log2_d_minus_one_auxiliaries(locality: int) -> None:
    count = next(bits for bits in range(6) if 2**bits >= locality) - 1
    assert stand_in("positive-logarithmic", locality, 1, "one-to-one").auxiliaries == count


def largest(part: StandIn, gap: int) -> Fraction:
    return max(abs(value) for item, value in part.coefficients(Fraction(1), Fraction(gap)).items() if item)


@pytest.mark.parametrize("locality", [3, 4])
@pytest.mark.parametrize("sign", [-1, 1])
def test_three_and_four_spins_need_the_least_largest_coefficient_known(locality: int, sign: int) -> None:
    sizes = [largest(spin_product(locality, sign), gap) for gap in (0, 1, 2)]
    assert sizes == [2, Fraction(5, 2), 3]


def test_splitting_keeps_the_coefficients_of_long_spin_products_small() -> None:
    for locality in (5, 8, 12):
        assert largest(stand_in("spin-split", locality, 1, "one-to-one"), 1) == Fraction(7, 2)


def test_a_flipped_literal_saves_couplers_on_a_positive_cubic_term() -> None:
    assert stand_in("flipped-literals", 3, 1, "one-to-one").couplers == 4
    assert stand_in("positive-monomial", 3, 1, "one-to-one").couplers == 6


def test_every_locality_and_sign_has_a_family_in_both_domains() -> None:
    for domain in ("spin", "boolean"):
        for locality in range(3, 40):
            for sign in (-1, 1):
                assert families_for(domain, locality, sign)


def test_an_unknown_family_is_refused_with_the_names() -> None:
    with pytest.raises(InputError, match="spin-product"):
        family("majority")


def test_a_block_is_served_as_its_terms_would_be_one_by_one() -> None:
    part = stand_in("positive-logarithmic", 5, 1, "one-to-one")
    members = np.array([[0, 1, 2, 3, 4], [1, 2, 4, 5, 6]])
    sizes = np.array([2, 7])
    unit, gap = Fraction(1, 3), Fraction(1, 2)
    piece = TermPiece(part, members, sizes, "x")
    resolution = shared_resolution([piece], unit, gap)
    parts, constant = piece.attach(7, unit, gap, resolution)
    found: dict[tuple[int, ...], Fraction] = {(): constant * resolution}
    for rows, weights in parts:
        for row, weight in zip(rows.tolist(), weights.tolist(), strict=True):
            found[tuple(row)] = found.get(tuple(row), Fraction(0)) + weight * resolution
    wanted: dict[tuple[int, ...], Fraction] = {(): Fraction(0)}
    for term in range(2):
        place = [*members[term].tolist(), 7 + 2 * term, 8 + 2 * term]
        for item, value in part.coefficients(int(sizes[term]) * unit, gap).items():
            key = tuple(place[i] for i in item)
            wanted[key] = wanted.get(key, Fraction(0)) + value
    assert found == wanted


def test_weights_beyond_int64_are_served_exactly() -> None:
    part = stand_in("negative-monomial", 3, -1, "one-to-one")
    piece = TermPiece(part, np.array([[0, 1, 2]]), np.array([2**61]), "x")
    parts, _ = piece.attach(3, Fraction(1), Fraction(1), Fraction(1))
    assert sorted(int(w) for _, weights in parts for w in weights) == [-(2**61) - 1] * 3 + [2**62 + 3]
