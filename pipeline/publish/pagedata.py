"""What the page's script works on: classes and rows of every map, fee response of every site."""

from __future__ import annotations

import json
from typing import Any

from pipeline.publish.manifest import finite
from pipeline.publish.mapmeasures import MapFigures
from pipeline.publish.markup import Html, tag
from pipeline.publish.results import Results


def data_block(results: Results, maps: list[MapFigures]) -> Html:
    """The data as a JSON block that no browser runs."""
    content: dict[str, Any] = {
        "currency": results.currency,
        "maps": {figures.site_id: figures.page_data() for figures in maps},
        "fees": {site_id: curve.page_data() for site_id, curve in results.fees.items()},
    }
    words = json.dumps(finite(content), ensure_ascii=False, separators=(",", ":"), allow_nan=False)
    # "<" could end the element.
    safe = Html(words.replace("<", "\\u003c"))
    return tag("script", safe, type="application/json", id="page-data")
