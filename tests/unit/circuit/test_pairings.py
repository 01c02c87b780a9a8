"""Pairings of clockwise with anticlockwise junctions."""

from hypothesis import given, settings
from hypothesis import strategies as st

from rulecheck.circuit.pairings import Junction, complete_pairings, is_balanced


def junctions(**weights):
    """Junctions of signed weights by name."""
    return tuple(Junction(part, 1 if w > 0 else -1, abs(w)) for part, w in weights.items())


def test_equal_weights_pair_in_every_way():
    """Three against three gives six pairings."""
    found = complete_pairings(junctions(A=1, B=1, C=1, D=-1, E=-1, F=-1))
    assert len(set(found)) == len(found) == 6
    assert (("A", "D"), ("B", "E"), ("C", "F")) in found


def test_unequal_weights_pair_with_their_like():
    """Junctions of weight 1 and 0.4 pair among themselves."""
    assert complete_pairings(junctions(A=1, B=-0.4, C=0.4, D=-1)) == ((("A", "D"), ("C", "B")),)


def test_a_double_weight_stands_against_two_singles():
    """A junction counted twice is compared with both."""
    assert complete_pairings(junctions(A=2, B=-1, C=-1)) == ((("A", "B"), ("A", "C")),)


def test_nearly_equal_weights_pair():
    """Weights two per cent apart, as resistors come, still pair one to one."""
    assert complete_pairings(junctions(A=1, B=0.5, C=-0.49, D=-1.01)) == ((("A", "D"), ("B", "C")),)


def test_what_does_not_cancel_has_no_pairing():
    """A single junction, one turn alone, and a quarter left over have none."""
    assert complete_pairings(junctions(A=1)) == ()
    assert complete_pairings(junctions(A=1, B=1)) == ()
    assert complete_pairings(junctions(A=1, B=-0.75)) == ()


def test_large_loops_are_bounded():
    """Ten against ten would give 3.6 million pairings; the search stops and what it gives is complete."""
    found = complete_pairings(junctions(**{f"A{i}": 1 for i in range(10)}, **{f"B{i}": -1 for i in range(10)}))
    assert 0 < len(found) <= 5000
    assert all(len({a for a, _ in pairing}) == len({b for _, b in pairing}) == 10 for pairing in found)


@settings(deadline=None)  # a busy machine is no fault
@given(st.lists(st.sampled_from([0.25, 0.5, 1.0, 2.0]), min_size=1, max_size=4), st.permutations(range(4)))
def test_every_pairing_covers_every_junction(weights, order):
    """Whatever the weights, each junction stands in each pairing, clockwise first."""
    clockwise = [Junction(f"A{i}", 1, w) for i, w in enumerate(weights)]
    anticlockwise = [Junction(f"B{i}", -1, weights[i]) for i in order if i < len(weights)]
    loop = (*clockwise, *anticlockwise)
    assert is_balanced(loop)
    found = complete_pairings(loop)
    assert found
    for pairing in found:
        assert {a for a, _ in pairing} == {j.part for j in clockwise}
        assert {b for _, b in pairing} == {j.part for j in anticlockwise}
