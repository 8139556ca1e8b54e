"""Findings: one small module a family, one registry."""
