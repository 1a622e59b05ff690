"""Thin commands: arguments in, exit status out, no arithmetic."""
