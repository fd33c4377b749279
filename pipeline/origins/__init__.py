"""Origins: where each visit record comes from.

``codes``       how a postal code is written, and how damage done to it is read back
``codebook``    the codes that a study knows, and what each written code stands for
``candidates``  the valid codes nearest to one that is not known
``geocoding``   the stage: every record gets a zone or the reason why it has none
"""

from pipeline.origins.geocoding import geocode, summarise_geocode

__all__ = ["geocode", "summarise_geocode"]
