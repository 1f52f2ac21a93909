"""Planning: slots, transfers between them, the price of holding them, and who flies where."""
