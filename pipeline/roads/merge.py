"""Roads of several files as one extract: a way or node that several hold is taken once."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

import numpy as np
import pandas as pd

from pipeline.roads.arrays import Bool, Int32, Int64, offsets, ranges
from pipeline.roads.extract import TAG_KEYS, RoadExtract
from pipeline.roads.signs import Signs, merge_signs

NO_PLACE = np.int32(2_147_483_647)  # a coordinate that the file does not give


@dataclass(frozen=True)
class TagColumn:
    """Values of one key: `categories[codes[i]]` is that of the object in row `rows[i]`."""

    rows: Int64
    codes: Int64
    categories: list[str]

    @classmethod
    def of(cls, rows: list[int], values: list[str]) -> TagColumn:
        """A column of rows and their values."""
        codes, categories = pd.factorize(np.array(values, dtype=object))
        return cls(np.array(rows, dtype=np.int64), codes.astype(np.int64), list(categories))


@dataclass(frozen=True)
class FileRoads:
    """Ways of one file over all the nodes that they refer to.

    Attributes
    ----------
    way_id : (w,) ids, in the order of the file.
    way_start : (w + 1,) way `i` runs over ``way_node[way_start[i]:way_start[i + 1]]``.
    way_node : (r,) index into the nodes.
    node_id : (n,) ids, ascending.
    node_lon_e7, node_lat_e7 : (n,) WGS 84 in units of 1e-7 degree; `NO_PLACE` where the file
        does not hold the node.
    tags : values of the ways by key.
    signs : tagged nodes and turn restrictions, where the format has them.
    """

    way_id: Int64
    way_start: Int64
    way_node: Int64
    node_id: Int64
    node_lon_e7: Int32
    node_lat_e7: Int32
    tags: dict[str, TagColumn]
    signs: Signs = field(default_factory=Signs)

    def nodes_of(self, way: int) -> list[int]:
        """Ids of the nodes of the way in a row."""
        nodes = self.way_node[self.way_start[way] : self.way_start[way + 1]]
        return [int(number) for number in self.node_id[nodes]]

    @property
    def located(self) -> Bool:
        """Nodes that the file holds."""
        return np.asarray((self.node_lon_e7 != NO_PLACE) & (self.node_lat_e7 != NO_PLACE))


def merge(files: list[FileRoads]) -> RoadExtract:
    """One extract of all files; the first file that holds a way or a node decides on it."""
    node_id, lon, lat, number = _nodes(files)
    way_id, first = np.unique(np.concatenate([f.way_id for f in files]), return_index=True)
    counts = np.concatenate([np.diff(f.way_start) for f in files])
    places = ranges(offsets(counts)[:-1][first], counts[first])
    way_node = np.concatenate([n[f.way_node] for n, f in zip(number, files, strict=True)])
    tagged_nodes, turn_relations = merge_signs([f.signs for f in files], node_id)
    return RoadExtract(
        node_id=node_id,
        node_lon_e7=lon,
        node_lat_e7=lat,
        way_id=way_id,
        way_start=offsets(counts[first]),
        way_node=way_node[places],
        way_tags=_tag_columns(files).take(first).reset_index(drop=True),
        tagged_nodes=tagged_nodes,
        turn_relations=turn_relations,
    )


def _nodes(files: list[FileRoads]) -> tuple[Int64, Int32, Int32, list[Int32]]:
    """Located nodes, ascending by id; and of each file's nodes their index among them, or -1."""
    located = [f.located for f in files]
    ids = np.concatenate([f.node_id[there] for f, there in zip(files, located, strict=True)])
    lon = np.concatenate([f.node_lon_e7[there] for f, there in zip(files, located, strict=True)])
    lat = np.concatenate([f.node_lat_e7[there] for f, there in zip(files, located, strict=True)])
    if len(files) > 1:
        ids, first = np.unique(ids, return_index=True)
        lon, lat = lon[first], lat[first]
    numbers = []
    for f, there in zip(files, located, strict=True):
        if len(files) == 1:
            index = np.cumsum(there) - 1
        else:
            index = np.searchsorted(ids, f.node_id)
            index[index == len(ids)] = 0
            there = ids[index] == f.node_id if len(ids) else there
        numbers.append(np.where(there, index, -1).astype(np.int32))
    return ids, lon, lat, numbers


def _tag_columns(files: list[FileRoads]) -> pd.DataFrame:
    """One categorical column per key, the files' ways one below the other."""
    starts = offsets(np.array([len(f.way_id) for f in files]))
    return pd.DataFrame(
        {key: _tag_column([f.tags.get(key) for f in files], starts) for key in TAG_KEYS}
    )


def _tag_column(parts: list[TagColumn | None], starts: Int64) -> pd.Categorical[Any]:
    """Values of one key in all files, with the distinct ones in order."""
    known = sorted({value for part in parts if part for value in part.categories})
    number = {value: code for code, value in enumerate(known)}
    codes = np.full(starts[-1], -1, dtype=np.int32)
    for part, start in zip(parts, starts[:-1], strict=True):
        if part and part.categories:
            as_known = np.array([number[value] for value in part.categories], dtype=np.int32)
            codes[part.rows + start] = as_known[part.codes]
    return pd.Categorical.from_codes(codes, categories=pd.Index(known, dtype=object))
