"""What a run was made from: inputs, settings, versions, seed. No time of day in it."""

from __future__ import annotations

import hashlib
import platform
from collections.abc import Iterator
from dataclasses import dataclass
from importlib import metadata
from pathlib import Path
from typing import Any

from pydantic import BaseModel

from pipeline import __version__
from pipeline.stamps import code_sha256, file_digest
from pipeline.study import Study

LIBRARIES = (
    "geopandas",
    "numba",
    "numpy",
    "osmium",
    "pandas",
    "pyproj",
    "scipy",
    "shapely",
    "statsmodels",
)


@dataclass(frozen=True)
class InputFile:
    """One input file: its name, the setting that names it, size in bytes and SHA-256."""

    name: str
    role: str
    bytes: int
    sha256: str


@dataclass(frozen=True)
class Provenance:
    """Everything that the figures depend on.

    Attributes
    ----------
    inputs : the input files, in the order of the study file.
    settings : every setting in force, defaults included.
    settings_set : dotted names of the settings that the study file itself gives.
    versions : this package, Python and the libraries that touch a figure.
    seed : seed of every random draw.
    code_sha256, study_sha256 : digests of the package's code and of the settings in force.
    """

    inputs: tuple[InputFile, ...]
    settings: dict[str, Any]
    settings_set: tuple[str, ...]
    versions: dict[str, str]
    seed: int
    code_sha256: str
    study_sha256: str


def trace(study: Study) -> Provenance:
    """Collect what a run of `study` is made from (reads and digests its input files)."""
    settings = study.resolved()
    return Provenance(
        inputs=tuple(
            InputFile(path.name, role, path.stat().st_size, file_digest(path))
            for role, path in _named_paths(study)
        ),
        settings=settings,
        settings_set=tuple(_set_keys(study)),
        versions={
            "roadworth": __version__,
            "python": platform.python_version(),
            **{name: metadata.version(name) for name in LIBRARIES},
        },
        seed=study.study.seed,
        code_sha256=code_sha256(),
        study_sha256=hashlib.sha256(repr(settings).encode()).hexdigest(),
    )


def _named_paths(section: BaseModel, prefix: str = "") -> Iterator[tuple[str, Path]]:
    """Every input path with the dotted name of its setting."""
    for key, field in type(section).model_fields.items():
        value, name = getattr(section, key), f"{prefix}{key}"
        if "output" in field.metadata:
            continue
        if isinstance(value, BaseModel):
            yield from _named_paths(value, f"{name}.")
        elif isinstance(value, Path):
            yield name, value
        elif isinstance(value, tuple):
            yield from ((name, item) for item in value if isinstance(item, Path))


def _set_keys(section: BaseModel, prefix: str = "") -> Iterator[str]:
    """Dotted names of the settings that stand in the study file."""
    for key in type(section).model_fields:
        if key not in section.model_fields_set:
            continue
        value = getattr(section, key)
        if isinstance(value, BaseModel):
            yield from _set_keys(value, f"{prefix}{key}.")
        else:
            yield f"{prefix}{key}"
