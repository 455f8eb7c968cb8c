"""The digest is SHA-256 over canonical JSON, recomputed here with the rfc8785 package as an independent writer."""

import hashlib

import rfc8785
from hypothesis import given
from hypothesis import strategies as st

import hubokit as hk
from tests.strategies import hamiltonians


def by_rfc8785(H):
    ordered = H.with_labels(sorted(H.labels))
    document = {
        "domain": H.domain,
        "variables": sorted(H.labels),
        "constant": str(H.constant),
        "terms": [
            {
                "locality": block.locality,
                "members": block.members.tolist(),
                "coefficients": [str(int(w) * H.resolution) for w in block.weights],
            }
            for block in ordered.blocks
        ],
    }
    return "sha256:" + hashlib.sha256(rfc8785.dumps(document)).hexdigest()


@given(hamiltonians())
def test_the_digest_covers_the_canonical_function(H):
    assert H.digest == by_rfc8785(H)


@given(
    st.lists(st.text(min_size=1, max_size=4).filter(lambda t: t.isprintable() or t.isascii()), min_size=1, max_size=4)
)
def test_awkward_names_are_written_as_rfc8785_writes_them(names):
    names = list({hk.Hamiltonian({(n,): 1}, "spin").labels[0]: None for n in names})
    H = hk.Hamiltonian({(n,): i + 1 for i, n in enumerate(names)}, "spin")
    assert H.digest == by_rfc8785(H)
