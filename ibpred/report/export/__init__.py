"""Results in the languages of other programs, as plain source text."""
