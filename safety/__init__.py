"""The gate, the guard process and the ledger. Not a safety function."""
