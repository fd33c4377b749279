"""What has been done already: digests of inputs, settings and code.

A stage's stamp is the digest of everything that it depends on. A stage whose stamp stands in
the work folder, with its outputs unchanged, is not run again. This module imports nothing
heavy, so that a study with nothing to do says so at once.
"""

from __future__ import annotations

import hashlib
import json
from functools import cache
from pathlib import Path
from typing import Any

from pipeline.study import Study

PACKAGE = Path(__file__).parent
CONFIG = PACKAGE.parent / "config"
WHOLE_RUN = "all"


def digest(*parts: object) -> str:
    """SHA-256 of JSON-like parts."""
    return hashlib.sha256(json.dumps(parts, sort_keys=True, default=str).encode()).hexdigest()


def file_digest(path: Path) -> str:
    """SHA-256 of a file's bytes."""
    with path.open("rb") as stream:
        return hashlib.file_digest(stream, "sha256").hexdigest()


@cache
def code_sha256() -> str:
    """SHA-256 over the package's own files and its default tables."""
    files = [p for p in PACKAGE.rglob("*") if p.is_file() and p.suffix != ".pyc"]
    files = [p for p in files if "__pycache__" not in p.parts]
    files += [p for p in (CONFIG / "roads.toml", *(CONFIG / "costs").glob("*.toml")) if p.is_file()]
    named = {p.relative_to(PACKAGE.parent).as_posix(): file_digest(p) for p in files}
    return digest(named)


def study_stamp(study: Study) -> str:
    """Digest of everything that a whole run of `study` depends on."""
    inputs = [(path.name, file_digest(path)) for path in study.input_files()]
    return digest(code_sha256(), study.resolved(), inputs)


def stamp_path(folder: Path, stage: str) -> Path:
    """Where the stamp of a stage stands, below the study's folder."""
    return folder / "work" / "stamps" / f"{stage}.json"


def read_stamp(folder: Path, stage: str) -> dict[str, Any]:
    """A stamp as it was written; an empty one where there is none or it cannot be read."""
    try:
        stamp = json.loads(stamp_path(folder, stage).read_text(encoding="utf-8"))
    except (OSError, ValueError):
        return {}
    return stamp if isinstance(stamp, dict) else {}


def file_digests(paths: list[Path], folder: Path) -> dict[str, str]:
    """SHA-256 of every file among (and below) `paths`, by its name below `folder`."""
    files: list[Path] = []
    for path in paths:
        files += sorted(p for p in path.rglob("*") if p.is_file()) if path.is_dir() else [path]
    return {p.relative_to(folder).as_posix(): file_digest(p) for p in files}


def stands(stamp: dict[str, Any], expected: str, folder: Path) -> bool:
    """Whether the stamp is the expected one and every file that it lists is as it was."""
    files: dict[str, str] = stamp.get("files", {})
    return stamp.get("stamp") == expected and all(
        (folder / name).is_file() and file_digest(folder / name) == sha256
        for name, sha256 in files.items()
    )


def nothing_to_do(study: Study) -> bool:
    """Whether the whole flow has been run with the same inputs, settings and code."""
    folder = study.study.folder
    stamp = read_stamp(folder, WHOLE_RUN)
    return bool(stamp) and stands(stamp, study_stamp(study), folder)
