"""Alternatives that choose their routes otherwise.

::

       n ══════ m        the northern road: longer, fast (120 km/h)
       │        │
  a ── b ────── c ── d   the road between b and c is short and slow (30 km/h)
"""

from __future__ import annotations

from pathlib import Path

import pandas as pd
import pytest

from pipeline.__main__ import main
from pipeline.errors import RouteError
from pipeline.routes import route
from pipeline.sensitivity import Flow, Pricing, Tables, rerouted_by
from pipeline.variants import Variant
from tests.ministudy import write_ministudy
from tests.roads.test_weights import PLACES, WAYS
from tests.roads.worlds import STEP_KM, a_study, graph_of, sites_at, zones_at

BY_DISTANCE = Variant("shortest", {"routes.minimise": "distance"})
DEARER = Variant("dearer", {"costs.vehicle_cost_per_km": 0.4})


def test_each_choice_is_routed_once_and_found_again(tmp_path: Path) -> None:
    """By time 7.6 km, by distance 6 steps; a variant of prices alone keeps the study's routes."""
    graph, _, _ = graph_of(tmp_path, PLACES, WAYS)
    zones, sites, study = zones_at({"z": PLACES["a"]}), sites_at({"s": PLACES["d"]}), a_study()
    routes = route(zones, sites, graph, study=study)[0]
    pricing = Pricing(pd.DataFrame(), routes, zones, sites)
    found = rerouted_by([BY_DISTANCE, DEARER, BY_DISTANCE], pricing, graph, None, study)
    assert len(found) == 1
    pricing.rerouted.update(found)
    flow = Flow(Tables(pricing, None, None), study)
    shortest = flow._routes(pricing, BY_DISTANCE.apply(study))
    assert shortest["distance_km"].iloc[0] == pytest.approx(6 * STEP_KM, abs=1e-4)
    assert routes["distance_km"].iloc[0] > 6.5 * STEP_KM
    assert flow._routes(pricing, DEARER.apply(study)) is routes
    pricing.rerouted.clear()
    with pytest.raises(RouteError, match="brings its routes ready made"):
        flow._routes(pricing, BY_DISTANCE.apply(study))


def test_a_whole_study_with_routes_chosen_otherwise(tmp_path: Path) -> None:
    """On the one straight road of the small study every choice gives the same routes and value."""
    study = write_ministudy(tmp_path)
    with study.open("a", encoding="utf-8") as file:
        file.write('\n[[sensitivity.variants]]\nname = "shortest"\n')
        file.write('changes = { "routes.minimise" = "distance" }\n')
    assert main(["all", str(study)]) == 0
    table = pd.read_csv(tmp_path / "mini" / "output" / "tables" / "sensitivity.csv")
    row = table.set_index("variant").loc["shortest"]
    assert row["change_percent"] == pytest.approx(0, abs=1e-6)
    assert pd.isna(row["note"])
