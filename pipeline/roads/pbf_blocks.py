"""Compiled decoding of the objects in a block of an OSM PBF file; see ``pbf_wire``.

Tags come as rows of three: number of the object, of the key's string, of the value's string.
"""

from __future__ import annotations

import numpy as np

from pipeline.roads.arrays import Int32, Int64, Uint8, compiled
from pipeline.roads.pbf_wire import BAD, GOOD, Number, field, lists, unzigzag, varint

OFF_EARTH = 2
# Kinds of content of a group, by their field numbers.
NODES, DENSE, WAYS, RELATIONS, CHANGESETS = 1, 2, 3, 4, 5
LON_LIMIT, LAT_LIMIT = 1_800_000_000, 900_000_000


# --- nodes -----------------------------------------------------------------------------------


@compiled
def dense(
    block: Uint8, start: Number, end: Number, head: Int64, key: Int64, wanted: Int64, every: Number
) -> tuple[Number, Int64, Int32, Int32, Int64, Int64]:
    """Nodes of a dense group that are wanted.

    Parameters
    ----------
    block, start, end : the group.
    head : granularity and offsets, see `survey`.
    key : for each string its position among the keys that make a node a sign, or -1.
    wanted : ids of nodes, ascending.
    every : of nodes without a tag one id in so many is sampled.

    Returns
    -------
    Whether it is sound; positions in `wanted` of the nodes found, their longitudes and
    latitudes; tags of those that are signs, with the position as number of the object; sampled
    ids of nodes without a tag.
    """
    outer, body, stop, after = field(block, start, end)
    span = np.zeros((11, 2), dtype=np.int64)
    if after != end or outer != DENSE or stop < 0 or not lists(block, body, stop, span)[0]:
        return _no_nodes(BAD, 0)
    room = span[1, 1] - span[1, 0]
    position = np.empty(room, dtype=np.int64)
    lon, lat = np.empty(room, dtype=np.int32), np.empty(room, dtype=np.int32)
    tags = np.empty((max(1, (span[10, 1] - span[10, 0]) // 2), 3), dtype=np.int64)
    alone = np.empty(room, dtype=np.int64)
    found, tagged, sampled, here = 0, 0, 0, 0
    at = span[:, 0].copy()
    node, y, x = np.int64(0), np.int64(0), np.int64(0)
    while at[1] < span[1, 1]:
        step, y_step, x_step = (
            _step(block, at, span, 1),
            _step(block, at, span, 8),
            _step(block, at, span, 9),
        )
        if at[1] < 0 or at[8] < 0 or at[9] < 0:
            return _no_nodes(BAD, 0)
        node, y, x = node + step, y + y_step, x + x_step
        here = _onward(wanted, here, node, step)
        is_wanted = here < len(wanted) and wanted[here] == node
        last, at[10], is_sign = _node_tags(block, at[10], span[10, 1], key, here, tags, tagged)
        if last < 0:
            return _no_nodes(BAD, 0)
        if last == tagged and node % every == 0:
            alone[sampled] = node
            sampled += 1
        tagged = last if is_wanted and is_sign else tagged
        if is_wanted:
            lon_e7, lat_e7 = _e7(x, head[0], head[2]), _e7(y, head[0], head[1])
            if abs(lon_e7) > LON_LIMIT or abs(lat_e7) > LAT_LIMIT:
                return _no_nodes(OFF_EARTH, node)
            position[found], lon[found], lat[found] = here, lon_e7, lat_e7
            found += 1
    if at[8] != span[8, 1] or at[9] != span[9, 1] or at[10] != span[10, 1]:
        return _no_nodes(BAD, 0)
    return GOOD, position[:found], lon[:found], lat[:found], tags[:tagged], alone[:sampled]


@compiled
def _no_nodes(why: Number, node: Number) -> tuple[Number, Int64, Int32, Int32, Int64, Int64]:
    none64, none32 = np.empty(0, dtype=np.int64), np.empty(0, dtype=np.int32)
    return why, np.array([node]), none32, none32, np.empty((0, 3), dtype=np.int64), none64


@compiled
def _step(block: Uint8, at: Int64, span: Int64, number: Number) -> Number:
    """The next difference of a list; `at` moves on, to -1 where there is none."""
    value, at[number] = varint(block, at[number], span[number, 1])
    return unzigzag(value)


@compiled
def _onward(wanted: Int64, here: Number, node: Number, step: Number) -> Number:
    """First position in `wanted` that is not below `node`, looked for from `here` on."""
    if step > 0 and (here == 0 or wanted[here - 1] < node):
        for _ in range(16):
            if here == len(wanted) or wanted[here] >= node:
                return here
            here += 1
    return np.searchsorted(wanted, node)


@compiled
def _node_tags(
    block: Uint8, at: Number, end: Number, key: Int64, number: Number, tags: Int64, tagged: Number
) -> tuple[Number, Number, bool]:
    """Tags of the next node into `tags`.

    Returns their new count (-1: not sound), where those of the node after it start, and
    whether one of them makes the node a sign.
    """
    is_sign = False
    while at < end:
        name, at = varint(block, at, end)
        if at < 0 or name < 0 or name >= len(key):
            return -1, 0, False
        if name == 0:
            break
        value, at = varint(block, at, end)
        if at < 0 or value < 0 or value >= len(key):
            return -1, 0, False
        tags[tagged, 0], tags[tagged, 1], tags[tagged, 2] = number, name, value
        tagged += 1
        is_sign = is_sign or bool(key[name] >= 0)
    return tagged, at, is_sign


@compiled
def _e7(units: Number, granularity: Number, offset: Number) -> Number:
    """A coordinate in 1e-7 degree, cut off towards zero as libosmium does."""
    nano = units * granularity + offset
    return nano // 100 if nano >= 0 else -(-nano // 100)


# --- ways and relations ----------------------------------------------------------------------


@compiled
def ways(
    block: Uint8, start: Number, end: Number, key: Int64, triggers: Number, every: Number
) -> tuple[Number, Int64, Int64, Int64, Int64, Int64]:
    """Ways of a group that have one of the first `triggers` keys.

    Returns
    -------
    Whether it is sound; ids; how many nodes each has; the nodes; their tags with wanted keys;
    of the nodes of all ways one id in `every`.
    """
    size = end - start
    way_id, count = np.empty(size // 2 + 1, dtype=np.int64), np.empty(size // 2 + 1, dtype=np.int64)
    ref, sample = np.empty(size, dtype=np.int64), np.empty(size, dtype=np.int64)
    tags = np.empty((size // 2 + 1, 3), dtype=np.int64)
    row, refs, tagged, sampled, at = 0, 0, 0, 0, start
    span = np.zeros((9, 2), dtype=np.int64)
    while at < end:
        number, begin, stop, at = field(block, at, end)
        if at < 0 or number != WAYS or stop < 0:
            return BAD, way_id, count, ref, tags, sample
        sound, identity = lists(block, begin, stop, span)
        last = _pairs(block, span, row, len(key), tags, tagged)
        last_ref = _nodes_of(block, span[8, 0], span[8, 1], ref, refs)
        if not sound or last < 0 or last_ref < 0:
            return BAD, way_id, count, ref, tags, sample
        for i in range(refs, last_ref):
            if ref[i] % every == 0:
                sample[sampled] = ref[i]
                sampled += 1
        kept, is_road = tagged, False
        for i in range(tagged, last):
            if key[tags[i, 1]] >= 0:
                tags[kept] = tags[i]
                kept += 1
                is_road = is_road or key[tags[i, 1]] < triggers
        if is_road:
            way_id[row], count[row] = identity, last_ref - refs
            row, refs, tagged = row + 1, last_ref, kept
    way_id, count, ref = way_id[:row].copy(), count[:row].copy(), ref[:refs].copy()
    return GOOD, way_id, count, ref, tags[:tagged].copy(), sample[:sampled].copy()


@compiled
def _pairs(
    block: Uint8, span: Int64, row: Number, strings: Number, tags: Int64, tagged: Number
) -> Number:
    """All tags of a way or relation into `tags`; their new count, -1: not sound."""
    at_key, at_value = span[2, 0], span[3, 0]
    while at_key < span[2, 1]:
        name, at_key = varint(block, at_key, span[2, 1])
        value, at_value = varint(block, at_value, span[3, 1])
        in_table = 0 <= name < strings and 0 <= value < strings
        if at_key < 0 or at_value < 0 or not in_table:
            return -1
        tags[tagged, 0], tags[tagged, 1], tags[tagged, 2] = row, name, value
        tagged += 1
    return tagged if at_value == span[3, 1] else -1


@compiled
def _nodes_of(block: Uint8, at: Number, end: Number, ref: Int64, refs: Number) -> Number:
    """Nodes of a way into `ref`; their new count, -1: not sound."""
    node = np.int64(0)
    while at < end:
        step, at = varint(block, at, end)
        if at < 0:
            return -1
        node += unzigzag(step)
        ref[refs] = node
        refs += 1
    return refs


@compiled
def relations(
    block: Uint8, start: Number, end: Number, strings: Number, type_key: Number, restriction: Number
) -> tuple[Number, Int64, Int64, Int64]:
    """Relations of a group that are turn restrictions.

    Returns
    -------
    Whether it is sound; ids; their tags; (row, kind, id, number of the role's string) of their
    members.
    """
    size = end - start
    ids = np.empty(size // 2 + 1, dtype=np.int64)
    tags = np.empty((size // 2 + 1, 3), dtype=np.int64)
    members = np.empty((size // 3 + 1, 4), dtype=np.int64)
    row, tagged, joined, at = 0, 0, 0, start
    span = np.zeros((11, 2), dtype=np.int64)
    while at < end:
        number, begin, stop, at = field(block, at, end)
        if at < 0 or number != RELATIONS or stop < 0:
            return BAD, ids, tags, members
        sound, identity = lists(block, begin, stop, span)
        last = _pairs(block, span, row, strings, tags, tagged)
        if not sound or last < 0:
            return BAD, ids, tags, members
        is_turn = False
        for i in range(tagged, last):
            is_turn = is_turn or (tags[i, 1] == type_key and tags[i, 2] == restriction)
        if not is_turn:
            continue
        joined = _members(block, span, row, strings, members, joined)
        if joined < 0:
            return BAD, ids, tags, members
        ids[row] = identity
        row, tagged = row + 1, last
    return GOOD, ids[:row].copy(), tags[:tagged].copy(), members[:joined].copy()


@compiled
def _members(
    block: Uint8, span: Int64, row: Number, strings: Number, members: Int64, joined: Number
) -> Number:
    """Members of a relation into `members`; their new count, -1: not sound."""
    at_role, at_kind, at_id, member = span[8, 0], span[10, 0], span[9, 0], np.int64(0)
    while at_id < span[9, 1]:
        step, at_id = varint(block, at_id, span[9, 1])
        role, at_role = varint(block, at_role, span[8, 1])
        kind, at_kind = varint(block, at_kind, span[10, 1])
        sound = 0 <= role < strings and 0 <= kind < 3
        if at_id < 0 or at_role < 0 or at_kind < 0 or not sound:
            return -1
        member += unzigzag(step)
        members[joined, 0], members[joined, 1] = row, kind
        members[joined, 2], members[joined, 3] = member, role
        joined += 1
    return joined
