"""Local solutions of any linear differential system with rational coefficients, at a fixed value of eps."""
