"""Ball arithmetic with the precision as an argument: every number carries a rigorous radius."""
