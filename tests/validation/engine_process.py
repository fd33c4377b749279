"""One matrix of the engine, in a process of the engine's own Python (one data set each).

    python engine_process.py DATA_SET.osrm WORK.json

The file holds `lon`, `lat` and the numbers of the `sources` and `destinations`; the answer goes
into the same file: `durations` (s) and `distances` (m), null where there is no route, and
`moved_m`, how far each point was moved onto a road.
"""

from __future__ import annotations

import json
import sys
from pathlib import Path
from typing import Any


def main() -> None:
    """Read the work, ask the engine, write the answer."""
    import osrm

    data_set, file = sys.argv[1], Path(sys.argv[2])
    work: dict[str, Any] = json.loads(file.read_text())
    engine = osrm.OSRM(
        storage_config=data_set,
        use_shared_memory=False,
        algorithm="MLD",
        max_locations_distance_table=100_000,
    )
    parameters = osrm.TableParameters(
        coordinates=list(zip(work["lon"], work["lat"], strict=True)),
        sources=work["sources"],
        destinations=work["destinations"],
        annotations=["duration", "distance"],
    )
    found = engine.Table(parameters)
    rows = {name: [list(row) for row in found[name]] for name in ("durations", "distances")}
    moved = [place["distance"] for name in ("sources", "destinations") for place in found[name]]
    file.write_text(json.dumps(rows | {"moved_m": moved}))


if __name__ == "__main__":
    main()
