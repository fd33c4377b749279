"""`make bench`: how fast roads are read and searched, as ratios in one run, into docs/.

    python -m tests.bench.run [--arcs 1,5,20] [--pbf FILE]

Ratios are medians of runs that take turns, so that a busy machine slows both sides alike. Large
runs have a process of their own (``one_run``). Takes about 20 minutes and 8 GB on two cores;
smaller sizes take less, and then the figures of the largest network are of the largest one asked.
"""

from __future__ import annotations

import argparse
import json
import platform
import shutil
import tempfile
from functools import partial
from pathlib import Path

import numpy as np

from tests.bench import against
from tests.bench.measure import (
    Figures,
    figure,
    median_s,
    one_run,
    seconds,
    timed_steps,
)
from tests.bench.networks import Arcs, planar_arcs, planar_graph, write_pbf

DOCS = Path(__file__).parents[2] / "docs"
CACHE = Path(__file__).parents[2] / "data" / "bench" / "work"


def reading(file: Path) -> Figures:
    """PBF → routable arrays against a pass that only decodes the same file."""
    bare, how = against.bare_pass(file)
    ours, decoded, steps = [], [], []
    against.read_and_build(file, {})
    for _ in range(3):
        decoded.append(seconds(bare))
        took: dict[str, float] = {}
        ours.append(seconds(partial(against.read_and_build, file, took)))
        steps.append(took)
    value = float(np.median(np.array(ours) / np.array(decoded)))
    size = f"{file.stat().st_size / 1e6:.0f} MB PBF"
    words = f"{size} to routable arrays (read_extract and build_roads) against {how}"
    figures = figure("read_vs_bare_pass", value, "ratio", 3, words)
    alone = float(np.median([s["read_extract"] / d for s, d in zip(steps, decoded, strict=True)]))
    figures |= figure("extract_vs_bare_pass", alone, "ratio", 3, f"{size}, read_extract alone")
    figures |= figure("bare_pass_s", float(np.median(decoded)), "s", 3, how)
    return figures | timed_steps(steps, size)


def growth(sizes: list[int]) -> Figures:
    """Exponents of time over arcs, over sites and over zones."""
    took, counts = [], []
    for size in sizes:
        arcs = planar_arcs(size)
        counts.append(len(arcs[1]))
        took.append(median_s(partial(against.searches, arcs, 1)))
    smallest: Arcs = planar_arcs(sizes[0])
    sites = [1, 2, 4, 8]
    by_sites = [median_s(partial(against.searches, smallest, n)) for n in sites]
    figures = _exponent("growth_arcs", counts, took, "one search; arcs")
    figures |= _exponent("growth_sites", sites, by_sites, f"{len(smallest[1]):,} arcs; sites")
    return figures | _by_zones(sizes[0])


def _by_zones(size: int) -> Figures:
    from tests.bench.one_run import routed

    graph, zones = planar_graph(size), [500, 2000, 8000]
    routed(graph, 10, 1)
    took = [median_s(partial(routed, graph, n, 8)) for n in zones]
    return _exponent("growth_zones", zones, took, f"routes to 8 sites, {graph.arcs:,} arcs; zones")


def _exponent(name: str, sizes: list[int], took: list[float], what: str) -> Figures:
    if len(sizes) < 2:
        return {}
    fitted = float(np.polyfit(np.log(sizes), np.log(took), 1)[0])
    pairs = ", ".join(f"{n:,}: {s:.3g} s" for n, s in zip(sizes, took, strict=True))
    return figure(name, fitted, "exponent", 3, f"{what} {pairs}")


def large(size: int) -> Figures:
    """Many sites on the largest network, and from arrays of segments to routes."""
    with tempfile.TemporaryDirectory(dir=CACHE) as folder:
        planar_graph(size).write(Path(folder))
        many = one_run(folder, 33_000, 50)
    whole = one_run(str(size), 1000, 1)
    arcs, per_arc = f"{many['arcs']:,.0f} arcs after contraction", many["peak_bytes"] / many["arcs"]
    how = f"route: 50 sites × 33,000 zones, {arcs}, one process"
    figures = figure("many_sites_s", many["seconds"], "s", 1, how)
    how = "its peak of resident memory above the idle process, mapped pages included"
    figures |= figure("many_sites_bytes_per_arc", per_arc, "bytes", 1, how)
    how = (
        f"{whole['arcs']:,.0f} arcs before contraction: build_roads {whole['built_s']:.1f} s, then "
        "route for 1 site × 1,000 zones"
    )
    return figures | figure("arrays_to_routes_s", whole["seconds"], "s", 1, how)


def main() -> None:
    """Run what is asked for and write docs/bench.json and docs/bench.md."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--arcs", default="1,5,20", help="millions of arcs, separated by commas")
    parser.add_argument("--pbf", type=Path, help="a PBF of your own instead of the made one")
    parser.add_argument("--to", type=Path, default=DOCS, help="folder of bench.json and bench.md")
    options = parser.parse_args()
    sizes = [int(float(size) * 1e6) for size in options.arcs.split(",")]
    CACHE.mkdir(parents=True, exist_ok=True)
    figures = reading(options.pbf or _made())
    figures |= against.contraction() | against.scipy_searches(planar_arcs(sizes[0]))
    figures |= against.script_of_today(planar_arcs(sizes[0]))
    figures |= growth(sizes) | large(sizes[-1])
    text = json.dumps(figures, indent=1, ensure_ascii=False)
    (options.to / "bench.json").write_text(text + "\n", encoding="utf-8")
    (options.to / "bench.md").write_text(_page(figures), encoding="utf-8")


def _made() -> Path:
    file = CACHE / "made.osm.pbf"
    if not file.exists():
        part = write_pbf(CACHE / "part.osm.pbf", side=1290, inner=1)
        shutil.move(part, file)
    return file


def _page(figures: Figures) -> str:
    rows = "".join(
        f"| {name} | {f['value']} | {f['unit']} | {f['n']} | {f['how']} |\n"
        for name, f in figures.items()
    )
    return (
        "# Measured by `make bench`\n\nMedians of runs that take turns; "
        f"Python {platform.python_version()}.\n\n"
        "| figure | value | unit | runs | how |\n|---|---|---|---|---|\n" + rows
    )


if __name__ == "__main__":
    main()
