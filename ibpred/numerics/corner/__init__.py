"""The masters near a corner of the kinematics where all their regions are products of Gamma functions.

Exactly in eps the local solutions fall into classes ``h^(a + b eps)`` (a modulo the integers); expansion by
regions gives the leading coefficients in each class, the differential system all others. What starts there
has exact boundary values, and needs neither an epsilon-form nor an auxiliary mass.
"""
