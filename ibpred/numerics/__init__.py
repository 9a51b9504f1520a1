"""Numbers with rigorous errors: local series, continuation, values of masters and integrals."""
