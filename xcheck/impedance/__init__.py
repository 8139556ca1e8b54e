"""Impedances of ports: return ratio, closed form with its surroundings, validity of the rule of thumb."""
