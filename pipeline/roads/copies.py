"""Copies of junctions: how a plain search obeys rules that depend on where one comes from.

Two rules do. A turn restriction forbids a run of edges; roads that are open to destination,
customers or deliveries may be used in the first part of a trip and in the last, not in between.
Only the junctions concerned get copies, one for each thing that a driver may bring along, and
arcs lead to the copy that fits; the search itself knows nothing of it and stays exact.

Who has come to a junction

- by ordinary roads, is at the junction itself;
- by limited roads from the start of the trip, is at its *start copy*: it leads on to ordinary
  roads and to limited ones (to their start copies);
- by an ordinary road and then limited ones, is at its *end copy*: only limited roads go on;
- with part of a forbidden run behind him, is at a *turn copy*: the edge that would complete the
  run does not leave it.

A limited part that touches the other roads in one place only cannot be driven through and needs
no copies. Ordinary roads behind limited ones (off the main network of ordinary roads) count
as limited. Turning round at a junction is allowed where no restriction forbids it, as it always
is in a search over junctions.
"""

from __future__ import annotations

from collections import defaultdict
from dataclasses import dataclass

import numpy as np

from pipeline.roads.arrays import Bool, Int32, Uint8
from pipeline.roads.restrictions import Run

START, END, TURN = 1, 2, 3  # kinds of copies; 0 would be the junction itself
Layer = int
History = frozenset[tuple[int, int]]  # (run, how many of its edges lie behind, less one)
State = tuple[int, Layer, History]


@dataclass(frozen=True)
class Copies:
    """The arcs of a graph with copies of some junctions.

    Attributes
    ----------
    tail, head : (a,) junctions or copies that each arc leaves and enters.
    edge : (a,) directed edge of each arc: twice the edge's number, plus one backwards.
    copy_of, copy_kind : (c,) junction of each copy, and its kind; copy `i` has the number
        ``junctions + i``.
    head_edge, head_node : directed edges, ascending, that lead a trip which starts on them to a
        copy, and the copy.
    tail_edge, tail_node : directed edges, ascending, that can also be left to from a copy.
    """

    tail: Int32
    head: Int32
    edge: Int32
    copy_of: Int32
    copy_kind: Uint8
    head_edge: Int32
    head_node: Int32
    tail_edge: Int32
    tail_node: Int32


def copy_junctions(
    tail: Int32, head: Int32, edge: Int32, limited: Bool, runs: list[Run], junctions: int
) -> Copies:
    """Arcs over junctions and copies from those over junctions alone.

    Parameters
    ----------
    tail, head, edge : of the open directed edges.
    limited : of each, whether it is open only at the ends of a trip.
    runs : forbidden runs of directed edges.
    junctions : how many junctions there are.
    """
    layers = _Layers.of(tail, head, limited, junctions)
    arcs, heads, tails = layers.arcs(tail, head, edge, limited)
    turns = _Turns(tail, head, edge, limited, runs, layers)
    if turns.begin:
        arcs = turns.redirect(*arcs)
        heads = {**heads, **turns.first_heads()}
    extra = np.array(turns.arcs, dtype=np.int32).reshape(-1, 3)
    tail_edge = np.concatenate([tails[0], np.array([t[0] for t in turns.tails], dtype=np.int32)])
    tail_node = np.concatenate([tails[1], np.array([t[1] for t in turns.tails], dtype=np.int32)])
    by_edge = np.lexsort((tail_node, tail_edge))
    head_edge = np.array(sorted(heads), dtype=np.int32)
    return Copies(
        tail=np.concatenate([arcs[0], extra[:, 0]]),
        head=np.concatenate([arcs[1], extra[:, 1]]),
        edge=np.concatenate([arcs[2], extra[:, 2]]),
        copy_of=np.array([*layers.nodes, *layers.nodes, *turns.copy_of], dtype=np.int32),
        copy_kind=np.repeat(
            np.array([START, END, TURN], dtype=np.uint8),
            [len(layers.nodes), len(layers.nodes), len(turns.copy_of)],
        ),
        head_edge=head_edge,
        head_node=np.array([heads[int(e)] for e in head_edge], dtype=np.int32),
        tail_edge=tail_edge[by_edge],
        tail_node=tail_node[by_edge],
    )


@dataclass(frozen=True)
class _Layers:
    """Start and end copies of the nodes that limited edges touch.

    Attributes
    ----------
    nodes : those junctions.
    number : of each junction its position among them; -1: none.
    junctions : how many junctions there are.
    """

    nodes: Int32
    number: Int32
    junctions: int

    @classmethod
    def of(cls, tail: Int32, head: Int32, limited: Bool, junctions: int) -> _Layers:
        nodes = np.unique(np.concatenate([tail[limited], head[limited]])).astype(np.int32)
        number = np.full(junctions, -1, dtype=np.int32)
        number[nodes] = np.arange(len(nodes), dtype=np.int32)
        return cls(nodes, number, junctions)

    def start(self, node: Int32) -> Int32:
        """Start copies of junctions; those without one themselves."""
        number = self.number[node]
        return np.where(number >= 0, self.junctions + number, node).astype(np.int32)

    def end(self, node: Int32) -> Int32:
        """End copies of junctions that have one."""
        return (self.junctions + len(self.nodes) + self.number[node]).astype(np.int32)

    def arcs(
        self, tail: Int32, head: Int32, edge: Int32, limited: Bool
    ) -> tuple[tuple[Int32, Int32, Int32, Uint8], dict[int, int], tuple[Int32, Int32]]:
        """Arcs with the layer of their head; heads and tails beside the junctions' own."""
        has_copy = self.number[tail] >= 0
        plain, off = np.flatnonzero(~limited), np.flatnonzero(~limited & has_copy)
        lim = np.flatnonzero(limited)
        tails = [tail[plain], self.start(tail[off]), tail[lim]]
        tails += [self.start(tail[lim]), self.end(tail[lim])]
        heads = [head[plain], head[off], self.end(head[lim])]
        heads += [self.start(head[lim]), self.end(head[lim])]
        edges = [edge[plain], edge[off], edge[lim], edge[lim], edge[lim]]
        layer = np.repeat(
            np.array([0, 0, END, START, END], dtype=np.uint8), [len(part) for part in edges]
        )
        first = dict(zip(edge[lim].tolist(), self.start(head[lim]).tolist(), strict=True))
        also = (
            np.concatenate([edge[off], edge[lim], edge[lim]]),
            np.concatenate([tails[1], tails[3], tails[4]]),
        )
        arcs = (np.concatenate(tails), np.concatenate(heads), np.concatenate(edges), layer)
        return arcs, first, also


class _Turns:
    """Turn copies: found one by one from the edges that begin a forbidden run."""

    def __init__(
        self,
        tail: Int32,
        head: Int32,
        edge: Int32,
        limited: Bool,
        runs: list[Run],
        layers: _Layers,
    ) -> None:
        self.runs, self.layers = runs, layers
        self.copy_of: list[int] = []
        self.arcs: list[tuple[int, int, int]] = []
        self.tails: list[tuple[int, int]] = []
        self._known: dict[State, int] = {}
        self._waiting: list[State] = []
        self._read_edges(tail, head, edge, limited)
        self.begin: dict[int, History] = {}
        for number, run in enumerate(runs):
            if all(step in self.head_of for step in run):
                self.begin[run[0]] = self.begin.get(run[0], frozenset()) | {(number, 0)}
        for step, history in self.begin.items():
            for layer in (START, END) if self.is_limited[step] else (0,):
                self._copy((self.head_of[step], layer, history))
        while self._waiting:
            self._leave(self._waiting.pop())

    def _read_edges(self, tail: Int32, head: Int32, edge: Int32, limited: Bool) -> None:
        """Heads of the edges of runs, and all edges that leave from those."""
        named = np.flatnonzero(np.isin(edge, [step for run in self.runs for step in run]))
        near = np.flatnonzero(np.isin(tail, head[named]))
        rows = np.union1d(named, near)
        self.head_of = dict(zip(edge[rows].tolist(), head[rows].tolist(), strict=True))
        self.is_limited = dict(zip(edge[rows].tolist(), limited[rows].tolist(), strict=True))
        self.out: dict[int, list[int]] = defaultdict(list)
        for row in near.tolist():
            self.out[int(tail[row])].append(int(edge[row]))

    def _copy(self, state: State) -> int:
        """Number of the copy for a state, made when first asked for."""
        if state not in self._known:
            before = self.layers.junctions + 2 * len(self.layers.nodes)
            self._known[state] = before + len(self.copy_of)
            self.copy_of.append(state[0])
            self._waiting.append(state)
        return self._known[state]

    def _leave(self, state: State) -> None:
        """Arcs from a copy along every edge that its history allows."""
        node, layer, history = state
        here = self._known[state]
        for step in self.out[node]:
            if any(self._completes(item, step) for item in history):
                continue
            if layer == END and not self.is_limited[step]:
                continue
            self.tails.append((step, here))  # to end the trip on that edge
            self.arcs.append((here, self._enter(step, layer, history), step))

    def _completes(self, item: tuple[int, int], step: int) -> bool:
        run, done = self.runs[item[0]], item[1]
        return done + 2 == len(run) and run[-1] == step

    def _enter(self, step: int, layer: Layer, history: History) -> int:
        """Junction or copy that an edge leads to from a state."""
        after = {(n, k + 1) for n, k in history if self.runs[n][k + 1] == step}
        after |= self.begin.get(step, frozenset())
        node = self.head_of[step]
        next_layer = 0
        if self.is_limited[step]:
            next_layer = START if layer == START else END
        if after:
            return self._copy((node, next_layer, frozenset(after)))
        return self._plain(node, next_layer)

    def _plain(self, node: int, layer: Layer) -> int:
        if layer == 0:
            return node
        copies = self.layers.start if layer == START else self.layers.end
        return int(copies(np.array([node], dtype=np.int32))[0])

    def redirect(
        self, tail: Int32, head: Int32, edge: Int32, layer: Uint8
    ) -> tuple[Int32, Int32, Int32, Uint8]:
        """Arcs of edges that begin a run lead to their turn copies."""
        head = head.copy()
        for row in np.flatnonzero(np.isin(edge, list(self.begin))).tolist():
            step = int(edge[row])
            state = (self.head_of[step], int(layer[row]), self.begin[step])
            head[row] = self._known[state]
        return tail, head, edge, layer

    def first_heads(self) -> dict[int, int]:
        """Where the edges that begin a run lead a trip that starts on them."""
        return {
            step: self._known[self.head_of[step], START if self.is_limited[step] else 0, history]
            for step, history in self.begin.items()
        }
