"""The wire format of OSM PBF files, read by compiled code.

The layout is that of the format's own definition (OpenStreetMap wiki, "PBF Format", with
fileformat.proto and osmformat.proto) in the wire format of protocol buffers: numbers of seven
bits per byte, differences in zigzag. Every read is held against the end of its message. Where
anything is not as it should be a function says so (by `BAD`, -1 or False), and the caller turns
to the reference reader.
"""

from __future__ import annotations

from typing import Any, TypeAlias

import numpy as np

from pipeline.roads.arrays import Int64, Uint8, compiled

Number: TypeAlias = Any  # whole: Python's or numpy's, which compiled code takes for one

GOOD, BAD = 0, 1
_LOW63 = (1 << 63) - 1


@compiled
def varint(block: Uint8, at: Number, end: Number) -> tuple[Number, Number]:
    """The number at `at`, and where the next one starts; -1: it does not end in time."""
    value, shift = np.int64(0), np.int64(0)
    while at < end and shift < 64:
        byte = np.int64(block[at])
        at += 1
        value |= (byte & 127) << shift
        if byte < 128:
            return value, at
        shift += 7
    return np.int64(0), -1


@compiled
def unzigzag(value: Number) -> Number:
    """A signed number from its zigzag form."""
    return ((value >> 1) & _LOW63) ^ -(value & 1)


@compiled
def field(block: Uint8, at: Number, end: Number) -> tuple[Number, Number, Number, Number]:
    """Number of the field at `at`, its value or where its content starts, and two ends.

    The third number is where the content ends (-1: the field is a number), the fourth where
    the next field starts (-1: this is no field).
    """
    tag, at = varint(block, at, end)
    kind, number = tag & 7, tag >> 3
    if at < 0 or number < 1:
        return 0, 0, 0, -1
    if kind == 0:
        value, at = varint(block, at, end)
        return number, value, -1, at
    if kind == 2:
        size, at = varint(block, at, end)
        if at < 0 or size < 0 or size > end - at:
            return 0, 0, 0, -1
        return number, at, at + size, at + size
    skip = 8 if kind == 1 else 4
    if (kind != 1 and kind != 5) or skip > end - at:
        return 0, 0, 0, -1
    return 0, 0, -1, at + skip


@compiled
def survey(block: Uint8) -> tuple[Number, Int64, Int64, Int64]:
    """What a block holds.

    Returns
    -------
    Whether it is sound; granularity, offset of latitudes and of longitudes; start and end of
    each string; kind, start and end of each group (a group of several kinds is not sound).
    """
    head = np.array([100, 0, 0], dtype=np.int64)
    strings, groups = np.empty((0, 2), dtype=np.int64), np.empty((0, 3), dtype=np.int64)
    count, at, end = 0, 0, len(block)
    room = np.empty((max(1, end // 2), 3), dtype=np.int64)
    while at < end:
        number, start, stop, at = field(block, at, end)
        if at < 0 or (number in (1, 2) and stop < 0) or (number in (17, 19, 20) and stop >= 0):
            return BAD, head, strings, groups
        if number == 1:
            sound, strings = string_table(block, start, stop)
            if not sound:
                return BAD, head, strings, groups
        elif number == 2 and stop > start:
            room[count, 0] = block[start] >> 3
            room[count, 1], room[count, 2] = start, stop
            count += 1
        elif number == 17:
            head[0] = start
        elif number == 19 or number == 20:
            head[number - 18] = start
    groups = room[:count].copy()
    return (GOOD if head[0] > 0 else BAD), head, strings, groups


@compiled
def string_table(block: Uint8, at: Number, end: Number) -> tuple[bool, Int64]:
    """Start and end of each string."""
    room = np.empty(((end - at) // 2 + 1, 2), dtype=np.int64)
    count = 0
    while at < end:
        number, start, stop, at = field(block, at, end)
        if at < 0 or number != 1 or stop < 0:
            return False, room[:0]
        room[count, 0], room[count, 1] = start, stop
        count += 1
    return True, room[:count].copy()


@compiled
def match(block: Uint8, strings: Int64, text: Uint8, ends: Int64) -> Int64:
    """For each string its position among wanted ones (one after the other in `text`), or -1."""
    found = np.full(len(strings), -1, dtype=np.int64)
    for i in range(len(strings)):
        start, size = strings[i, 0], strings[i, 1] - strings[i, 0]
        begin = 0
        for k in range(len(ends)):
            if ends[k] - begin == size and size > 0 and text[begin] == block[start]:
                same = True
                for c in range(1, size):
                    if text[begin + c] != block[start + c]:
                        same = False
                        break
                if same:
                    found[i] = k
            begin = ends[k]
    return found


@compiled
def lists(block: Uint8, at: Number, end: Number, span: Int64) -> tuple[bool, Number]:
    """Start and end of the lists of a message go into `span` by field number; its id, if any."""
    span[:] = 0
    identity = np.int64(0)
    while at < end:
        number, begin, stop, at = field(block, at, end)
        if at < 0:
            return False, identity
        if number == 1 and stop < 0:
            identity = begin
        elif number != 4 and 1 <= number < len(span):
            if stop < 0 or span[number, 1] > 0:
                return False, identity
            span[number, 0], span[number, 1] = begin, stop
    return True, identity
