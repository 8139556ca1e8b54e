"""Simulation results that the user already has."""
