"""Names, closed forms and rules of thumb of stages: one module a topology, one registry."""
