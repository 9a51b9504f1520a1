"""The stages of one family and of several together, each computed once and kept."""
