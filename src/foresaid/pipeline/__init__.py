"""The only place that knows every stage: one function for each use of the ledger."""
