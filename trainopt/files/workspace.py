"""A workspace and one case in it, as other rooms get them."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

from trainopt.errors import Problem
from trainopt.files.catalog import Catalog
from trainopt.files.medium import Medium
from trainopt.files.scenario import Scenario
from trainopt.files.source import Source, file_hash, shown_path


@dataclass(frozen=True)
class Workspace:
    """A folder with `models/`: its catalog, its media by name, and what the user should know about them."""

    root: Path
    catalog: Catalog
    media: Mapping[str, Medium]
    warnings: tuple[Problem, ...] = ()


@dataclass(frozen=True)
class Case:
    """One scenario in its workspace; `warnings` holds the workspace's too."""

    workspace: Workspace
    scenario: Scenario
    warnings: tuple[Problem, ...] = ()

    @property
    def media(self) -> dict[str, Medium]:
        """The media that some stage of the scenario may use, by name, sorted."""
        names = sorted({choice.medium for stage in self.scenario.stages for choice in stage.media})
        return {name: self.workspace.media[name] for name in names}

    @property
    def sources(self) -> tuple[Source, ...]:
        """The YAML files that the case rests on."""
        scenario = self.scenario.source
        return (
            scenario,
            *scenario.parents,
            self.workspace.catalog.source,
            *(medium.source for medium in self.media.values()),
        )

    def inputs(self) -> dict[str, str]:
        """Every file that the case rests on, bench runs included, with "sha256:…" of its bytes."""
        out = {source.shown: f"sha256:{source.sha256}" for source in self.sources if source.sha256}
        for medium in self.media.values():
            for run in medium.curve.runs:
                out[shown_path(run.file)] = f"sha256:{file_hash(run.file)}"
        return dict(sorted(out.items()))
