"""Runs the flow: reads inputs, calls the stages, checks and writes what they return.

This is the edge: the only place where stage tables meet files. A stage is run when its stamp
(inputs, settings, code) is not the one in the work folder, or an output is not as it was.
"""

from __future__ import annotations

import json
import time
from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import pandas as pd

from pipeline import stamps
from pipeline.errors import PipelineError, StudyError
from pipeline.files import atomic_folder, locked, read_table, write_table, write_text
from pipeline.flow import INPUTS, Either, Kind, Maybe, Stage, brought, plan
from pipeline.inputs import read_brought
from pipeline.publish import Publication
from pipeline.schema import Table
from pipeline.study import Study

Tell = Callable[[str], None]


@dataclass
class Run:
    """One run of a study's flow; remembers the inputs that it has read.

    `tell` gets one line per stage when it is done; `begin` its name, place and the total number
    of stages when it starts.
    """

    study: Study
    tell: Tell
    again: bool = False
    begin: Callable[[str, int, int], None] | None = None
    _inputs: dict[Kind, Any] = field(default_factory=dict)

    def upto(self, last: str) -> None:
        """Run the stages that the study needs, up to and with `last`."""
        stages = plan(self.study)
        names = [stage.name for stage in stages]
        if last not in names:
            raise StudyError(
                f"this study brings a ready table and has no stage {last!r}; "
                f"its stages: {', '.join(names)}."
            )
        with locked(self.folder / "work"):
            self._upto(stages[: names.index(last) + 1], whole=last == names[-1])

    def _upto(self, stages: tuple[Stage, ...], *, whole: bool) -> None:
        last = stages[-1].name
        stale = {stage.name for stage in stages if not self._is_done(stage)}
        self._check_inputs([stage for stage in stages if stage.name in stale])
        for place, stage in enumerate(stages):
            if self.begin:
                self.begin(stage.name, place, len(stages))
            if self._is_done(stage) and not (self.again and stage.name == last):
                self.tell(f"{stage.name}: nothing has changed")
            else:
                self._run(stage)
        if whole:
            self._stamp_whole_run(stages)

    # --- what is done ------------------------------------------------------------------------

    def _is_done(self, stage: Stage) -> bool:
        stamp = stamps.read_stamp(self.folder, stage.name)
        return stamps.stands(stamp, self._stamp(stage), self.folder)

    def _stamp(self, stage: Stage) -> str:
        """Digest of the code, the settings and everything that the stage reads."""
        reads = [self._read_stamp(kind) for kind, _ in stage.read_kinds()]
        settings = self.study.settings_digest(stage.sections)
        return stamps.digest(stamps.code_sha256(), stage.name, settings, reads)

    def _read_stamp(self, kind: Kind) -> object:
        ready = brought(self.study)
        if kind in ready:
            return stamps.file_digest(ready[kind])
        if kind in INPUTS:
            files = self.study.only(INPUTS[kind].sections).input_files()
            settings = self.study.settings_digest(INPUTS[kind].sections)
            return [settings, *(stamps.file_digest(file) for file in files)]
        for stage in plan(self.study):
            if kind in stage.writes:
                return stamps.read_stamp(self.folder, stage.name).get("files", {})
        return None

    def _stamp_whole_run(self, stages: tuple[Stage, ...]) -> None:
        files = [self._path(kind) for stage in stages for kind in stage.writes]
        self._write_stamp(stamps.WHOLE_RUN, stamps.study_stamp(self.study), files)

    def _write_stamp(self, name: str, stamp: str, files: list[Path]) -> None:
        content = {"stamp": stamp, "files": stamps.file_digests(files, self.folder)}
        write_text(json.dumps(content, indent=1) + "\n", stamps.stamp_path(self.folder, name))

    # --- running -----------------------------------------------------------------------------

    def _run(self, stage: Stage) -> None:
        started = time.perf_counter()
        stamp = self._stamp(stage)
        arguments = self._arguments(stage)
        results = stage.run(*arguments, study=self.study.only(stage.sections))
        checked = tuple(
            _checked(kind, result) for kind, result in zip(stage.writes, results, strict=True)
        )
        for kind, result in zip(stage.writes, checked, strict=True):
            self._write(kind, result)
        self._write_stamp(stage.name, stamp, [self._path(kind) for kind in stage.writes])
        seconds = time.perf_counter() - started
        self.tell(f"{stage.name}: {stage.summarise(checked)}, {seconds:.1f} s")

    def _arguments(self, stage: Stage) -> list[Any]:
        arguments: list[Any] = []
        for item in stage.reads:
            if isinstance(item, Maybe):
                arguments.append(self._get(item.kind))
            elif isinstance(item, Either):
                found = [self._get(kind) for kind in item.kinds]
                if all(table is None for table in found):
                    raise PipelineError(f"{stage.name}: no finished table to work on.")
                arguments += found
            else:
                arguments.append(self._needed(item, stage))
        return arguments

    def _needed(self, kind: Kind, stage: Stage) -> Any:
        value = self._get(kind)
        if value is None:
            key = INPUTS[kind].key if kind in INPUTS else kind.__name__
            raise StudyError(
                f"stage {stage.name!r} needs {key}, and the study file does not give it. "
                "Add the key, or bring a ready table (routes.table, market.zone_table)."
            )
        return value

    def _get(self, kind: Kind) -> Any:
        """A table or artefact: brought, an input, or written by a stage; None if not there."""
        if kind in self._inputs:
            return self._inputs[kind]
        ready = brought(self.study)
        if kind in ready:
            self._inputs[kind] = read_brought(kind, ready[kind])
            return self._inputs[kind]
        if kind in INPUTS:
            self._inputs[kind] = self._read_input(kind)
            return self._inputs[kind]
        if not any(kind in stage.writes for stage in plan(self.study)):
            return None
        path = self._path(kind)
        return read_table(kind, path) if issubclass(kind, Table) else kind.read(path)

    def _read_input(self, kind: Kind) -> Any:
        source = INPUTS[kind]
        if not _is_given(self.study, source.key):
            return None
        return _checked(kind, source.read(self.study))

    def _check_inputs(self, stages: list[Stage]) -> None:
        """Read the study's own tables before the first stage, so that errors come first."""
        for stage in stages:
            for kind, _ in stage.read_kinds():
                if kind in INPUTS and issubclass(kind, Table):
                    self._get(kind)

    # --- where things stand ------------------------------------------------------------------

    @property
    def folder(self) -> Path:
        """The study's folder, with work/ and output/."""
        return self.study.study.folder

    def _path(self, kind: Kind) -> Path:
        if kind is Publication:
            return self.folder / "output"
        if issubclass(kind, Table):
            return self.folder / "work" / f"{kind.table_name()}.parquet"
        return self.folder / "work" / str(kind.folder_name)

    def _write(self, kind: Kind, result: Any) -> None:
        if issubclass(kind, Table):
            write_table(result, self._path(kind))
            return
        with atomic_folder(self._path(kind)) as folder:
            result.write(folder)


def _checked(kind: Kind, result: Any) -> Any:
    """Hold a table against its declaration; artefacts check themselves."""
    if issubclass(kind, Table) and isinstance(result, pd.DataFrame):
        return kind.checked(result)
    return result


def _is_given(study: Study, key: str) -> bool:
    """Whether the study file names the file of an input."""
    value: Any = study
    for part in key.split("."):
        value = getattr(value, part)
    return bool(value)
