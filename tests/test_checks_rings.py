"""Rings and ways of a graph, against counts by hand and against taking each edge out."""

from hypothesis import given
from hypothesis import strategies as st

from farvolt.checks.rings import ring_numbers, ways

EDGES = st.lists(st.tuples(st.integers(0, 7), st.integers(0, 7)), max_size=14)


def joined(edges: list[tuple[int, int]], start: int, end: int) -> bool:
    """Whether a way leads from one node to another."""
    reached, waiting = {start}, [start]
    while waiting:
        node = waiting.pop()
        near = {b for a, b in edges if a == node} | {a for a, b in edges if b == node}
        waiting += near - reached
        reached |= near
    return end in reached


@given(EDGES)
def test_an_edge_is_on_a_ring_if_its_ends_stay_joined_without_it(edges: list[tuple[int, int]]) -> None:
    """The definition itself, edge by edge."""
    numbers = ring_numbers(edges)
    for place, (a, b) in enumerate(edges):
        others = edges[:place] + edges[place + 1 :]
        assert (numbers[place] >= 0) == (a != b and joined(others, a, b))


def test_rings_that_share_one_point_are_two() -> None:
    """A bow tie of two triangles at node 0, and a tail: the tail is on no ring."""
    numbers = ring_numbers([(0, 1), (1, 2), (2, 0), (0, 3), (3, 4), (4, 0), (4, 5)])
    assert numbers[0] == numbers[1] == numbers[2] >= 0
    assert numbers[3] == numbers[4] == numbers[5] >= 0
    assert numbers[0] != numbers[3]
    assert numbers[6] == -1


def test_a_long_tree_needs_no_deep_stack() -> None:
    assert ring_numbers([(node, node + 1) for node in range(5000)]) == [-1] * 5000


@given(EDGES, st.sets(st.integers(0, 7)))
def test_ways_use_every_edge_of_theirs_once(edges: list[tuple[int, int]], junctions: set[int]) -> None:
    found = ways(edges, junctions)
    used = [edge for way in found for edge in way.edges]
    assert len(used) == len(set(used))
    for way in found:
        inner = {node for edge in way.edges for node in edges[edge]} - {way.start, way.end}
        assert not inner & junctions


def test_two_chains_side_by_side() -> None:
    """0-1-3 and 0-2-3 stand side by side between 0 and 3 where something stands there; 3-4 is a way of its own."""
    found = ways([(0, 1), (1, 3), (0, 2), (2, 3), (3, 4)], {0})
    assert {(frozenset((way.start, way.end)), frozenset(way.edges)) for way in found} == {
        (frozenset((0, 3)), frozenset((0, 1))),
        (frozenset((0, 3)), frozenset((2, 3))),
        (frozenset((3, 4)), frozenset((4,))),
    }
