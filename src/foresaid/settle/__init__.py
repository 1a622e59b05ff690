"""Calls times market times conventions: outcomes, each with what decided it."""
