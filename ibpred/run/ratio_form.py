"""The epsilon-form in the plain ratios of a family whose usual form is in other variables.

In the usual variables square roots are rational, as polylogarithms want it, but most points of the invariants
have irrational images. In the ratios the form keeps its roots, and every point is rational: values are taken
there.
"""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

from ibpred.boundary.fix import Boundary, fix_constants
from ibpred.boundary.problem import boundary_problem
from ibpred.diffeq.ratios import ratio_coordinates
from ibpred.epsform.factorise import factorise
from ibpred.epsform.form import EpsilonForm, Obstructed
from ibpred.errors import UnfinishedError
from ibpred.run.stages import SEED

if TYPE_CHECKING:
    from ibpred.run.chain import Chain


def form_in_ratios(chain: Chain) -> EpsilonForm | Obstructed:
    """Factorise the differential equation in the ratios."""
    plain = ratio_coordinates(chain.derivation().system, chain.signs())
    return factorise(chain.connection_in(plain), chain.primes, SEED, chain.progress)


def boundary_in_ratios(chain: Chain, weight: int) -> Boundary:
    """Boundary constants of that form.

    Raises
    ------
    UnfinishedError
        If the region is not Euclidean, there is no form, or constants stay open.
    """
    if not chain.is_euclidean():
        raise UnfinishedError(
            "boundary constants of a form in ratios that keeps roots need a Euclidean region"
        )
    masters, form, signs = chain.masters().masters, chain.ratio_form(), chain.euclidean_signs()
    problem = boundary_problem(chain.definition, masters, form, signs, weight)
    if weight > 0:
        problem = replace(problem, start=chain.ratio_boundary(0).start)
    return fix_constants(problem, progress=chain.progress)
