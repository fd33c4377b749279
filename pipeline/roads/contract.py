"""Contraction: chains of segments between junctions become edges."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from pipeline.roads.arrays import Bool, Int64, Uint8, compiled, grouped, offsets, ranges
from pipeline.roads.segments import Segments


@dataclass(frozen=True)
class Chains:
    """Edges between junctions, each a run of segments in the order of travel from `start`.

    Attributes
    ----------
    first : (e + 1,) edge `i` is made of ``segment[first[i]:first[i + 1]]``.
    segment : segments, each exactly once.
    against : whether the edge runs through the segment from b to a.
    start, end : (e,) nodes of the extract at the ends of each edge; equal for a loop.
    """

    first: Int64
    segment: Int64
    against: Bool
    start: Int64
    end: Int64


def contract(segments: Segments, nodes: int, group: Uint8, forced: Int64) -> Chains:
    """Join segments at every node where nothing can be decided.

    A node lies within a chain if exactly two segments of the same group end there, and who
    comes in by one can leave by the other in the same directions. Everything else is a
    junction: real ones, dead ends, places where a two-way road becomes one-way, terminals,
    and the nodes that are to be junctions in any case (a turn restriction bites there).
    A closed ring without a junction is cut at one of its nodes.

    Parameters
    ----------
    segments : open stretches of road.
    nodes : how many nodes the extract has.
    group : of each segment: segments of different groups are never joined.
    forced : nodes that are to be junctions.
    """
    ends = np.concatenate([segments.a, segments.b]).astype(np.int64)
    start, order = grouped(ends, nodes)
    can_ab, can_ba = ~np.isnan(segments.forward_s), ~np.isnan(segments.backward_s)
    kind = _kinds(can_ab, can_ba, group)
    inner = _inner_nodes(start, order, kind)
    inner[forced] = False
    first, half = _walk(start, order, ends, inner)
    # A half is a segment seen from one end: below the count from a, above it from b.
    count = segments.count
    other = np.where(half < count, half + count, half - count)
    last = first[1:] - 1
    return Chains(
        first=first,
        segment=half % max(count, 1),
        against=half >= count,
        start=ends[half[first[:-1]]],
        end=ends[other[last]],
    )


def _kinds(can_ab: Bool, can_ba: Bool, group: Uint8) -> Uint8:
    """Bits of each half: 1 can be left by, 2 can be come in by, 4 and up the group."""
    from_a = can_ab * 1 + can_ba * 2 + group * 4
    from_b = can_ba * 1 + can_ab * 2 + group * 4
    return np.concatenate([from_a, from_b]).astype(np.uint8)


def _inner_nodes(start: Int64, order: Int64, kind: Uint8) -> Bool:
    """Nodes with two halves of matching kinds, not both of one segment."""
    inner = np.diff(start) == 2
    at = np.flatnonzero(inner)
    one, two = kind[order[start[at]]], kind[order[start[at] + 1]]
    swapped = (two & 1) * 2 + (two & 2) // 2 + (two & 0xFC)
    inner[at] = one == swapped
    return np.asarray(inner, dtype=np.bool_)


@compiled
def _walk(start: Int64, order: Int64, ends: Int64, inner: Bool) -> tuple[Int64, Int64]:
    """Follow every chain from junction to junction, then the rings that have none."""
    halves = len(ends)
    count = halves // 2
    done = np.zeros(count, dtype=np.bool_)
    first = np.zeros(count + 1, dtype=np.int64)
    chain = np.empty(count, dtype=np.int64)
    edges, placed = 0, 0
    for ring in range(2):
        for node in range(len(start) - 1):
            if inner[node] and ring == 0:
                continue
            for position in range(start[node], start[node + 1]):
                half = order[position]
                if done[half % count]:
                    continue
                here = node
                while True:
                    done[half % count] = True
                    chain[placed] = half
                    placed += 1
                    here = ends[half + count if half < count else half - count]
                    if not inner[here] or here == node:
                        break
                    back = half + count if half < count else half - count
                    one = order[start[here]]
                    half = order[start[here] + 1] if one == back else one
                edges += 1
                first[edges] = placed
    return first[: edges + 1], chain


def reorder(chains: Chains, order: Int64) -> Chains:
    """The same edges in another order."""
    counts = np.diff(chains.first)[order]
    places = ranges(chains.first[:-1][order], counts)
    return Chains(
        first=offsets(counts),
        segment=chains.segment[places],
        against=chains.against[places],
        start=chains.start[order],
        end=chains.end[order],
    )
