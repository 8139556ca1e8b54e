"""The settings of one review: a frozen object handed down, never ambient state."""

from dataclasses import dataclass
from pathlib import Path
from typing import Literal

DEFAULT_TOLERANCE = 0.01
"""Where neither the caller nor the project file says one."""

EngineChoice = Literal["auto", "ngspice", "none"]


@dataclass(frozen=True, slots=True)
class Options:
    """spots, band: Hz; tolerance: relative difference (0.01 is 1 %), None: as the project file says; band None: as the
    deck declares; results: a raw file to take simulated values from, instead of running ngspice; ports_measured:
    whether the ports are simulated at all, where the operating point alone is wanted."""

    spots: tuple[float, ...] = ()
    band: tuple[float, float] | None = None
    tolerance: float | None = None
    engine: EngineChoice = "auto"
    subckt: str | None = None
    include_dirs: tuple[Path, ...] = ()
    ports: tuple[str, ...] = ()
    results: Path | None = None
    ports_measured: bool = True
