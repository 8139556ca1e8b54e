"""Names, closed forms and rules of thumb of stages: one module a topology, one registry."""

from xcheck.topologies.recognition import TOPOLOGIES, classify

__all__ = ["TOPOLOGIES", "classify"]
