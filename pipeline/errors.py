"""What can go wrong, in one small tree.

PipelineError
├── StudyError           the study file: unknown key, value out of range, file not there
├── InputError           a file that the study brings cannot be read as what it should be
│   ├── TableError       a table: missing column, wrong type, value out of range, duplicate key
│   └── RoadsError       a road extract: truncated, malformed, without roads
├── GeocodingError       too many visit records without a zone
├── RouteError           a site off the road extract, no zone routed
├── CostError            a price that cannot be worked out
├── JoinError            visits and zones that do not fit together
├── DemandError          a regression that cannot be fitted
├── SurplusError         a surplus that cannot be worked out
└── PublishError         an output that cannot be written

Every message says what is wrong, where, how many, gives an example, and ends with the remedy.
Only the command line turns them into an exit code.
"""

from __future__ import annotations


class PipelineError(Exception):
    """Base of everything that this package raises on purpose."""


class StudyError(PipelineError):
    """The study file asks for something that does not exist or cannot be."""


class InputError(PipelineError):
    """A file that the study brings cannot be read as what it should be."""


class TableError(InputError):
    """A table lacks a column, or holds a value that cannot be right."""


class RoadsError(InputError):
    """A road extract is truncated, malformed or without usable roads."""


class GeocodingError(PipelineError):
    """More visit records are without a zone than the study allows."""


class RouteError(PipelineError):
    """A site lies off the road extract, or no zone reaches any site."""


class CostError(PipelineError):
    """A travel cost cannot be worked out from what the study gives."""


class JoinError(PipelineError):
    """Visits, costs and zones do not fit together."""


class DemandError(PipelineError):
    """A demand model cannot be fitted to the finished table."""


class SurplusError(PipelineError):
    """A surplus cannot be worked out from the estimates."""


class PublishError(PipelineError):
    """An output cannot be written."""
