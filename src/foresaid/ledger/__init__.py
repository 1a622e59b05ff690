"""The ledger file: the only SQL of the project."""
