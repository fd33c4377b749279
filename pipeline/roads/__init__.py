"""Roads: from an extract to a directed, routable graph.

The way of the data, one module per step:

``formats``   reads files of any format into the internal form (``extract``): ways over
              located nodes: ``pbf`` (with ``pbf_frame``, ``pbf_blocks``, ``pbf_wire``) OSM
              PBF, ``osm`` any OSM file by libosmium, ``graphml`` osmnx's graphs, ``layers``
              lines with names of their own (``noding``); ``merge`` makes them one extract;
              ``overpass`` downloads a file of them for a boundary, before the flow
``rules``     what each way allows, by config/roads.toml; ``speeds`` reads tagged values
``segments``  stretches between neighbouring nodes, with geodesic lengths and times
``contract``  chains of stretches between junctions become edges
``networks``  parts in which every place can be reached and left
``build``     puts the graph together (``graph``), with ``quality`` and ``lines`` for maps
``places``    ties points to the nearest place on a road
"""

from pipeline.roads.build import build_roads, summarise_roads
from pipeline.roads.extract import RoadExtract
from pipeline.roads.formats import read_extract
from pipeline.roads.graph import RoadGraph

__all__ = ["RoadExtract", "RoadGraph", "build_roads", "read_extract", "summarise_roads"]
