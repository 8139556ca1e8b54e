"""The data-sheet catalogue: typical values of common parts, found by the names that decks use."""

import re
import tomllib
from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache
from pathlib import Path
from types import MappingProxyType
from typing import Any

FAMILIES = ("bipolar", "precision", "jfet", "cmos", "fast", "others")
_PINOUTS = {1: "single-8", 2: "dual-8", 4: "quad-14"}
_NAME = re.compile(r"(?:x_)?(?P<part>[a-z]+\d+)(?P<grade>[a-z]{0,4})(?:\d{1,2}[a-z]?)?(?:[_/-].*)?", re.DOTALL)


@dataclass(frozen=True, slots=True)
class Part:
    """name: lower case; kind: voltage-feedback, current-feedback, transconductance or comparator; data_sheet: whose
    typical values these are; sections: amplifiers in a package; values: SI, by key, unsure ones left out;
    pinout: pin number to role (`in-`, in multiple packages `in1-`), empty where it is not a standard one."""

    name: str
    kind: str
    data_sheet: str
    from_memory: bool
    sections: int
    values: Mapping[str, float]
    pinout: Mapping[str, str]


def find(name: str) -> Part | None:
    """The part that a subcircuit name speaks of, None where it speaks of none.

    What counts, in any case of letters: a part's whole name with its maker's prefix (`uA741`, `TL072`), `x_` before
    it, up to four letters of grade and package with one or two figures after it (`TL072ACP`, `LT1028CS8`), and
    anything behind `_`, `/` or `-` (`LM741CN/NS`, `lm358_5`). A further figure right after the name is another part
    (`OP275` is no `OP27`), a bare number (`741`) is none, and grades that are another chip (`TL072H`) are not found.
    """
    # the micro sign and the Greek letter mu
    text = name.strip().lower().replace("\N{MICRO SIGN}", "u").replace("\N{GREEK SMALL LETTER MU}", "u")
    match = _NAME.fullmatch(text)
    if match is None:
        return None
    part, others = catalogue().get(match["part"], (None, frozenset()))
    grade = match["grade"]
    # a letter that marks another chip comes first in the suffix, before the package
    return None if any(grade.startswith(other) for other in others) else part


@cache
def catalogue() -> Mapping[str, tuple[Part, frozenset[str]]]:
    """All parts by name, each with the beginnings of suffixes that mean another chip. Read once, when first asked."""
    folder = Path(__file__).parent
    pinouts = _read(folder / "pinouts.toml")
    parts: dict[str, tuple[Part, frozenset[str]]] = {}
    for family in FAMILIES:
        for entry in _read(folder / f"{family}.toml").values():
            values = MappingProxyType({key: float(value) for key, value in entry["values"].items()})
            for name, sections in entry["members"].items():
                pins = pinouts[_PINOUTS[sections]] if entry.get("standard_pins") else {}
                kind = entry.get("kind", "voltage-feedback")
                part = Part(name, kind, entry["data_sheet"], True, sections, values, MappingProxyType(pins))
                parts[name] = (part, frozenset(entry.get("other_chips", ())))
    return MappingProxyType(parts)


def _read(path: Path) -> dict[str, Any]:
    with path.open("rb") as file:
        return tomllib.load(file)
