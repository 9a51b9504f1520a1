"""Values of integrals without analytic input: a mass on one line flows from infinity to zero.

The method of Liu, Ma, Wang, arXiv:1711.09572, and Liu, Ma, arXiv:2201.11637; lines linear in the loop
momenta are curved first: Liu, Ma, arXiv:2201.11636.
"""
