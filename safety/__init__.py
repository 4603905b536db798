"""The gate, the guard process and the ledger. No safety function: see SAFETY notes."""
