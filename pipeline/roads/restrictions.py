"""Turn restrictions: from relations to runs of road that must not be driven one after the other.

A restriction by a node names two stretches that meet there; one by ways names the stretches on
either side of them and all between. Both end as a forbidden run of directed segments, twice the
segment's number, plus one against its way. An ``only_`` restriction forbids every other
way out. A restriction on roads that are closed anyway is moot and is passed over.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterator
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
import pandas as pd

from pipeline.roads.arrays import Int64
from pipeline.roads.contract import Chains
from pipeline.roads.extract import RoadExtract
from pipeline.roads.segments import Segments
from pipeline.roads.signs import ROLES, TurnRelations

Run = tuple[int, ...]
FROM, VIA, TO = range(len(ROLES))


@dataclass(frozen=True)
class Restrictions:
    """What the turn restrictions of an extract forbid.

    Attributes
    ----------
    runs : forbidden runs of directed segments.
    nodes : nodes of the extract at which they bite; they must stay junctions.
    applied, moot : relations in force, and on roads that are closed anyway.
    unread : relation ids that cannot be read, with the reason.
    """

    runs: tuple[Run, ...] = ()
    nodes: tuple[int, ...] = ()
    applied: int = 0
    moot: int = 0
    unread: tuple[tuple[int, str], ...] = ()


class UnreadError(Exception):
    """A relation that does not say what it forbids; never leaves this module."""


def read_restrictions(
    extract: RoadExtract, segments: Segments, values: pd.Series[str]
) -> Restrictions:
    """Forbidden runs of the turn restrictions that are in force.

    Parameters
    ----------
    extract : with its turn relations.
    segments : open stretches of road.
    values : of each relation ``no_…`` or ``only_…``; missing where it is not in force.
    """
    relations = extract.turn_relations
    roads = _Roads(extract, segments, relations)
    runs: dict[Run, None] = {}
    nodes: dict[int, None] = {}
    unread: list[tuple[int, str]] = []
    applied = moot = 0
    for row in np.flatnonzero(values.notna().to_numpy()).tolist():
        try:
            found = list(_runs_of(roads, relations, row, str(values.iloc[row])))
        except UnreadError as error:
            unread.append((int(relations.relation_id[row]), str(error)))
            continue
        applied, moot = applied + bool(found), moot + (not found)
        for run, bites in found:
            runs[run] = None
            nodes.update(dict.fromkeys(bites))
    return Restrictions(tuple(runs), tuple(sorted(nodes)), applied, moot, tuple(unread))


class _Roads:
    """Directed segments by way and by node, of the ways and nodes that relations name."""

    def __init__(self, extract: RoadExtract, segments: Segments, relations: TurnRelations) -> None:
        self.extract = extract
        named = relations.member_ref[relations.member_is_way]
        ways = np.flatnonzero(np.isin(extract.way_id, named))
        self.way_number = {int(extract.way_id[way]): int(way) for way in ways}
        self.of_way: dict[int, list[int]] = defaultdict(list)
        self.leaving: dict[int, list[int]] = defaultdict(list)
        self.ends: dict[int, tuple[int, int]] = {}
        of_ways = np.flatnonzero(np.isin(segments.way, ways))
        touched = np.unique(np.concatenate([segments.a[of_ways], segments.b[of_ways]]))
        at_nodes = np.isin(segments.a, touched) | np.isin(segments.b, touched)
        for s in np.flatnonzero(at_nodes).tolist():
            a, b = int(segments.a[s]), int(segments.b[s])
            if not np.isnan(segments.forward_s[s]):
                self._add(2 * s, int(segments.way[s]), a, b)
            if not np.isnan(segments.backward_s[s]):
                self._add(2 * s + 1, int(segments.way[s]), b, a)

    def _add(self, step: int, way: int, tail: int, head: int) -> None:
        self.of_way[way].append(step)
        self.leaving[tail].append(step)
        self.ends[step] = (tail, head)

    def into(self, way: int, node: int) -> list[int]:
        """Directed segments of a way that enter a node."""
        return [step for step in self.of_way[way] if self.ends[step][1] == node]

    def out_of(self, way: int, node: int) -> list[int]:
        """Directed segments of a way that leave a node."""
        return [step for step in self.of_way[way] if self.ends[step][0] == node]

    def node_number(self, ref: int) -> int:
        """Index of a node by its id; -1 where no road has it."""
        index = int(np.searchsorted(self.extract.node_id, ref))
        known = index < len(self.extract.node_id) and self.extract.node_id[index] == ref
        return index if known else -1

    def way_nodes(self, way: int) -> list[int]:
        """Nodes along a way."""
        start, stop = self.extract.way_start[way], self.extract.way_start[way + 1]
        return [int(node) for node in self.extract.way_node[start:stop]]


def _runs_of(
    roads: _Roads, relations: TurnRelations, row: int, value: str
) -> Iterator[tuple[Run, list[int]]]:
    """Forbidden runs of one relation, each with the nodes that lie between its stretches."""
    if not value.startswith(("no_", "only_")):
        raise UnreadError(f"'{value}' is no restriction that is known")
    members = range(relations.member_first[row], relations.member_first[row + 1])
    by_role: tuple[list[int], ...] = ([], [], [])
    for member in members:
        by_role[relations.member_role[member]].append(member)
    if not all(by_role):
        raise UnreadError("a member is missing")
    ways: list[list[int]] = [
        [roads.way_number.get(int(relations.member_ref[m]), -1) for m in found] for found in by_role
    ]
    by_ways = relations.member_is_way[by_role[VIA]]
    if by_ways.any() and not by_ways.all():
        raise UnreadError("it goes by a node and a way")
    for start in ways[FROM]:
        for end in ways[TO]:
            if start < 0 or end < 0:
                continue  # the way is not in the extract: it is no road
            if by_ways.all():
                legs = _by_ways(roads, start, ways[VIA], end)
            else:
                node = roads.node_number(int(relations.member_ref[by_role[VIA][0]]))
                legs = [([], node)]
            yield from _forbidden(roads, start, end, legs, value)


def _forbidden(
    roads: _Roads, start: int, end: int, legs: list[tuple[list[int], int]], value: str
) -> Iterator[tuple[Run, list[int]]]:
    """Runs by a path of directed segments (empty: by a node alone) to the last node."""
    for path, node in legs:
        first = roads.ends[path[0]][0] if path else node
        entering, leaving = roads.into(start, first), roads.out_of(end, node)
        if not entering or not leaving:
            continue  # moot
        if len(entering) > 1 or len(leaving) > 1:
            raise UnreadError("its way goes on on both sides of the junction")
        out = leaving
        if value.startswith("only_"):
            out = [step for step in roads.leaving[node] if step != leaving[0]]
        bites = [first, *(roads.ends[step][1] for step in path)]
        for step in out:
            yield (entering[0], *path, step), bites


def _by_ways(roads: _Roads, start: int, via: list[int], end: int) -> list[tuple[list[int], int]]:
    """The path along the via ways from an end of the first way to an end of the last one.

    None where a via way is no open road; more than one cannot be told apart.
    """
    for order in (via, via[::-1]):
        stops = [roads.way_nodes(way) if way >= 0 else [] for way in (start, *order, end)]
        if not all(stops):
            return []
        joints = []
        for one, two in pairwise(stops):
            tips = [node for node in (two[0], two[-1]) if node in one]
            tips = tips or [node for node in (one[0], one[-1]) if node in two]
            joints.append(list(dict.fromkeys(tips)))
        if all(joints):
            break
    else:
        raise UnreadError("its ways do not meet")
    if any(len(joint) > 1 for joint in joints):
        raise UnreadError("its ways meet twice")
    path: list[int] = []
    for way, here, there in zip(order, joints[:-1], joints[1:], strict=True):
        leg = _along_way(roads, way, here[0], there[0])
        if leg is None:
            return []
        path += leg
    return [(path, joints[-1][0])] if path else []


def _along_way(roads: _Roads, way: int, one: int, two: int) -> list[int] | None:
    """Directed segments along a way from one of its nodes to another; None where closed."""
    nodes = roads.way_nodes(way)
    first, last = nodes.index(one), nodes.index(two)
    step = 1 if last >= first else -1
    path = []
    for here in range(first, last, step):
        tail, head = nodes[here], nodes[here + step]
        found = [s for s in roads.of_way[way] if roads.ends[s] == (tail, head)]
        if not found:
            return None
        path.append(found[0])
    return path


def edge_runs(runs: tuple[Run, ...], chains: Chains) -> list[Run]:
    """Runs of directed edges from those of directed segments.

    A directed edge is twice the edge's number, plus one against it.
    """
    where = np.empty(len(chains.segment), dtype=np.int64)
    where[chains.segment] = np.arange(len(where))
    edge_of: Int64 = np.repeat(np.arange(len(chains.start)), np.diff(chains.first))
    result: dict[Run, None] = {}
    for run in runs:
        edges: list[int] = []
        for number, step in enumerate(run):
            place = int(where[step // 2])
            edge = int(edge_of[place])
            against = (step % 2) ^ int(chains.against[place])
            begins = chains.first[edge + 1] - 1 if against else chains.first[edge]
            if number == 0 or place == begins:
                edges.append(2 * edge + against)
        result[tuple(edges)] = None
    return list(result)
