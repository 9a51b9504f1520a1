"""Values from a solved epsilon-form: local series with rigorous tails, paths, masters."""
