"""roadworth: from visit records and a road extract to the value of an outdoor site.

The flow, one way, each stage a pure function from tables to tables:

===========  ================================  =================================================
stage        module                            writes
===========  ================================  =================================================
geocode      ``origins``                       ``origins``, ``origin_summary``
roads        ``roads``                         road graph, ``road_quality``, ``road_lines``
route        ``routes`` (``search``)           ``routes``, ``route_lines``, ``route_quality``
cost         ``costs``                         ``costs``, ``reported_check``
join         ``finished``                      ``zone_table``, ``trip_table``
demand       ``demand``                        ``estimates``, ``fit``, ``diagnostics``,
                                               ``residuals``
surplus      ``surplus``                       ``surplus``, ``fee_schedule``, ``zone_surplus``
sensitivity  ``sensitivity`` (``variants``)    ``sensitivity``
publish      ``publish``                       GeoPackage, GeoJSON, Parquet, CSV, report, run.json
===========  ================================  =================================================

``flow`` lists the stages with what each reads and writes; ``tables`` declares every column;
``settings`` declares every key of a study file; ``errors`` every error.
"""

__version__ = "0.1.0"
