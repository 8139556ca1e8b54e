"""The project file `xcheck.toml`: what a repository says of its parts, its models' pins and its limits.

    band = "20:20k"                     where the design is used
    tolerance = "0.5%"                  analytic against simulated

    [parts.GAUGE7]                      a data sheet that the catalogue lacks, or values that override it
    like = "tl072"                      what is not said is taken from there
    gain = 5e5

    [amplifiers.gauge_model]            a subcircuit of that name
    pins = { "in+" = "3", "in-" = "2", out = "6", "v+" = "7", "v-" = "4" }    pin names, or places counted from 1
    part = "GAUGE7"                     the data sheet that holds for it
    output_resistance_ohm = 60          what the analytic methods take instead of the model's own value

Values are SI; numbers, or texts as in a deck (`"1meg"`).
"""

import tomllib
from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from difflib import get_close_matches
from pathlib import Path
from types import MappingProxyType

from xcheck.errors import ProjectError
from xcheck.parts.catalogue import Part, catalogue, find

NAME = "xcheck.toml"


@dataclass(frozen=True)
class StatedAmplifier:
    """What a project says of a subcircuit. pins: role to pin name, or place counted from 1; part: the name of a part,
    '' for none; values: open-loop values by the catalogue's keys, SI."""

    pins: Mapping[str, str | int] = field(default_factory=dict)
    part: str = ""
    values: Mapping[str, float] = field(default_factory=dict)


@dataclass(frozen=True)
class Project:
    """A project file as read. path: '' where there is none; band: Hz; tolerance: relative; parts, amplifiers: by
    lower-case name."""

    path: str = ""
    band: tuple[float, float] | None = None
    tolerance: float | None = None
    parts: Mapping[str, Part] = field(default_factory=dict)
    amplifiers: Mapping[str, StatedAmplifier] = field(default_factory=dict)

    def part_of(self, subckt: str) -> Part | None:
        """The data sheet that holds for a subcircuit: the one that the project names, a part of the project's own, or
        one of the catalogue by its name."""
        stated = self.amplifiers.get(subckt.lower())
        name = stated.part.lower() if stated is not None and stated.part else subckt.lower()
        return self.parts.get(name) or self._by_catalogue(name)

    def _by_catalogue(self, name: str) -> Part | None:
        part = find(name)
        # an override of a part holds for all ways to write its name
        return self.parts.get(part.name, part) if part is not None else None


def find_project(deck: Path) -> Path | None:
    """The project file that holds for a deck: the nearest one from its folder upwards, no further than the repository
    that holds it; outside of a repository only that beside it."""
    home = deck.resolve().parent
    folders = [home, *home.parents]
    root = next((k for k, folder in enumerate(folders) if (folder / ".git").exists()), 0)
    return next((f / NAME for f in folders[: root + 1] if (f / NAME).is_file()), None)


def read_project(path: Path) -> Project:
    """The project that a file describes. Raises ProjectError with every fault, one a line, each with its key."""
    try:
        with path.open("rb") as file:
            table = tomllib.load(file)
    except (OSError, ValueError) as error:
        raise ProjectError(f"{path} cannot be read: {error}") from error
    from xcheck.project.tables import faults_of, tables_of

    tables = tables_of(table)
    if tables is None:
        raise ProjectError("\n".join(f"{path}: {fault}" for fault in faults_of(table)))
    parts: dict[str, Part] = {}
    for name, entry in tables.parts.items():
        base = find(entry.like or name)
        if entry.like and base is None:
            near = get_close_matches(entry.like.lower(), list(catalogue()), n=1)
            hint = f"; did you mean `{near[0]}`?" if near else ""
            raise ProjectError(f"{path}: parts.{name}.like: no part `{entry.like}` is known{hint}")
        own = entry.values()
        parts[name.lower()] = _part(name.lower(), base, own, entry.data_sheet, entry.kind, entry.sections, path)
    amplifiers = {
        name.lower(): StatedAmplifier(MappingProxyType(entry.pins), entry.part, MappingProxyType(entry.values()))
        for name, entry in tables.amplifiers.items()
    }
    return Project(str(path), tables.band, tables.tolerance, parts, amplifiers)


def _part(
    name: str, base: Part | None, values: Mapping[str, float], sheet: str, kind: str, sections: int, path: Path
) -> Part:  # fmt: skip
    if base is None:
        own = Part(name, "voltage-feedback", f"project file {path.name}", False, 1, {}, {})
    else:
        own = replace(base, name=name, data_sheet=f"project file {path.name}" if values else base.data_sheet)
    return replace(
        own, values=MappingProxyType({**own.values, **values}), data_sheet=sheet or own.data_sheet,
        kind=kind or own.kind, sections=sections or own.sections,
    )  # fmt: skip
