"""The answer of recognition."""

from dataclasses import dataclass


@dataclass(frozen=True)
class Recognised:
    """The name of a stage's topology and a sentence on what was seen that led to it."""

    topology: str
    seen: str
