"""publish: what people take away.

=============  =========================================================================
module         makes
=============  =========================================================================
``privacy``    tables without small cells; means in place of records
``results``    all tables of a run in one place, and the headline values
``layers``     GIS layers (``roads_used``: stretches of road with their visits)
``geofiles``   GeoPackage and GeoJSON files
``tabular``    CSV and Parquet files, data dictionary
``manifest``   run.json
``report``     the HTML page, from ``answer``, ``evidence``, ``findings``, ``assumptions``,
               ``losses`` and ``closing``; figures by ``mapview`` (``mapframe``, ``classes``,
               ``labels``, ``legend``) and ``charts`` (``axes``, ``curve``); elements by
               ``markup``, wording by ``words``, looks in ``report.css``
``referee``    the report's section for a referee: ``changes`` (what would change the answer),
               ``residualmap``, diagnostics
=============  =========================================================================
"""

from pipeline.publish.publication import Publication, publish, summarise_publish

__all__ = ["Publication", "publish", "summarise_publish"]
