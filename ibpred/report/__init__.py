"""Tables, LaTeX and the readable summary."""
