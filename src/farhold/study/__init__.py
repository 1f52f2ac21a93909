"""Studies: whole answers to a user's question, made of planning, dynamics and the ledger."""
