"""Nonlinear elements to linear ones at an operating point that a simulator found."""

from xcheck.linearisation.linearise import Linearised, linearise

__all__ = ["Linearised", "linearise"]
