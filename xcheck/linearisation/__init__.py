"""Nonlinear elements to linear ones at an operating point that a simulator found."""

from xcheck.linearisation.linearise import Linearised, linearise
from xcheck.linearisation.nominal import nominal

__all__ = ["Linearised", "linearise", "nominal"]
