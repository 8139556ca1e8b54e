"""Cards to the flat circuit: parameters evaluated, subcircuits expanded."""

from xcheck.elaboration.expand import elaborate

__all__ = ["elaborate"]
