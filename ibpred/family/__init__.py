"""What the user defines: lines, kinematics, graphs, graph polynomials; reading family files."""
