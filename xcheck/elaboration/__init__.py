"""Cards to the flat circuit: parameters evaluated, subcircuits expanded."""
