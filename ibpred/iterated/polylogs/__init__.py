"""Multiple polylogarithms: values as balls, special arguments, limits, fibration bases."""
