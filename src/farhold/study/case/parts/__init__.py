"""What the parts of a case resolve to, and what each says of the others."""
