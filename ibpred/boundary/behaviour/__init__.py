"""How integrals behave at the borders of the kinematics: regions, thresholds, closed forms."""
