"""The operating point: what a simulator found before any small signal."""

from collections.abc import Mapping
from dataclasses import dataclass, field


@dataclass(frozen=True)
class OperatingPoint:
    """volts: of each flat node; amperes: by flat name of a voltage source (also E, H, L, and B that give a voltage),
    into its first node; devices: small-signal values that the simulator reports of a device, by flat name and then by
    the simulator's own name of the value ('gm', 'gpi', ... in S, F, V and A)."""

    volts: Mapping[str, float]
    amperes: Mapping[str, float] = field(default_factory=dict)
    devices: Mapping[str, Mapping[str, float]] = field(default_factory=dict)
