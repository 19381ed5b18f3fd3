"""Two comparable Hamiltonians go in; closings of the gap between them, and what changes, leave."""
