"""A ledger of market calls, settled against prices and scored against chance."""

__version__ = "0.1.0"
