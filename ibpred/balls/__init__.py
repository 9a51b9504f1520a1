"""Ball arithmetic with explicit precision."""
