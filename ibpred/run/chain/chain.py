"""The chain: each stage computed once, kept in the store, and read by the next."""

from __future__ import annotations

from dataclasses import replace
from functools import cached_property

from ibpred.boundary.conditions.edges import Corner
from ibpred.boundary.conditions.explore import BoundaryProblem
from ibpred.boundary.conditions.fix import Boundary, fix_constants
from ibpred.boundary.continued import continued
from ibpred.boundary.problem import boundary_of_series, one_scale_values, problem_in_variables
from ibpred.boundary.problem import boundary_problem as problem_in_ratios
from ibpred.diffeq.ratios import (
    Coordinates,
    DimensionlessSystem,
    changed,
    dimensionless,
    ratio_coordinates,
)
from ibpred.epsform.factorise import factorise
from ibpred.epsform.form import Connection, EpsilonForm, Obstructed
from ibpred.epsform.variables import RootVariables, Variables, root_variables
from ibpred.errors import InputError, ObstructionError, UnfinishedError
from ibpred.family.signs import euclidean_signs, region_signs
from ibpred.run.chain.equations import Equations
from ibpred.run.chain.normalisation import normalised, trivial_form
from ibpred.run.chain.records import Outcome, StoppedError, outcome_of
from ibpred.run.chain.stages import SEED


class Chain(Equations):
    """The stages of one family from its differential equations to its boundary constants.

    The parameters are those of `ibpred.run.chain.equations.Equations`.
    """

    def signs(self) -> dict[str, int]:
        """Signs of the invariants in the region of the solution, where the ratios are positive."""
        return dict(self._region[0])

    def is_euclidean(self) -> bool:
        """Whether that region is the Euclidean one."""
        return self._region[1]

    @cached_property
    def _region(self) -> tuple[dict[str, int], bool]:
        signs = region_signs(self.definition)
        return signs, euclidean_signs(self.definition) == signs

    def left_euclidean_region(self) -> bool:
        """Whether the family asks for another region than the Euclidean one that it has."""
        return bool(self.definition.region) and euclidean_signs(self.definition) is not None

    def in_euclidean_region(self) -> Chain:
        """The same family solved in its Euclidean region, from where i0 leads everywhere."""
        plain = replace(self.definition, region=())
        return Chain(plain, self.store, self.watcher, self.workers, self.preferred, self.expired)

    def coordinates(self) -> Coordinates:
        """Dimensionless variables: the ratios, the user's, or those in which square roots are rational."""
        system = self.derivation().system
        first = ratio_coordinates(system, self.signs(), self.definition.variables)
        if self.definition.variables or not first.names:
            return first

        used = self.root_variables(first).used
        return first if used is None else changed(first, used.names, used.images, used.partners)

    def root_variables(self, ratios: Coordinates) -> RootVariables:
        """What is done about the square roots of the equations in the ratios."""

        def search() -> RootVariables:
            self.progress.stage("square roots")
            return root_variables(self.connection_in(ratios), self.primes, SEED, self.progress, self.expired)

        return self.kept("square roots", RootVariables, None, search)

    def offered(self) -> tuple[Coordinates, Variables] | None:
        """Variables in which all square roots are rational, where the chain does not use them by itself."""
        ratios = ratio_coordinates(self.derivation().system, self.signs(), self.definition.variables)
        if self.definition.variables or not ratios.names:
            return None
        found = self.root_variables(ratios).offered
        if found is None:
            return None
        return changed(ratios, found.names, found.images, found.partners), found

    def in_ratios(self) -> bool:
        """Whether the variables of the epsilon-form are just the ratios of the invariants."""
        if len(self.definition.invariants) <= 1:
            return True
        plain = ratio_coordinates(self.derivation().system, self.signs())
        return dict(self.coordinates().values) == dict(plain.values)

    def dimensionless(self) -> DimensionlessSystem:
        """The differential equations in dimensionless variables and eps."""
        return dimensionless(self.derivation().system, self.coordinates())

    def connection(self) -> Connection:
        """What is brought to epsilon-form."""
        return self.connection_in(self.coordinates())

    def connection_in(self, coordinates: Coordinates) -> Connection:
        """The differential equations in some dimensionless variables."""
        system = dimensionless(self.derivation().system, coordinates)
        labels = tuple(self.label(i) for i in range(len(self.masters().masters)))
        return Connection(system.ratios, system.ring, system.matrices, system.blocks, labels)

    def epsilon_form(self) -> EpsilonForm | Obstructed:
        """The epsilon-factorised form, or what stands in its way.

        Where the time allowed is over before all blocks were looked at, what was reached is returned (an
        `Obstructed` that is not complete); the blocks that were looked at are kept.
        """
        connection = self.connection()

        def compute() -> Outcome:
            notes = self._notes("blocks")
            found = factorise(connection, self.primes, SEED, self.watcher, self.expired, notes)
            if isinstance(found, Obstructed) and not found.complete:
                raise StoppedError(found)
            values = self.coordinates().values.values()
            return outcome_of(normalised(found, values, lambda form: self.boundary_problem(form, 0)))

        try:
            stored = self.kept("epsilon-form", Outcome, None, compute)
        except StoppedError as stopped:
            return stopped.reached
        found = stored.form if stored.form is not None else stored.obstructed
        assert found is not None
        return found

    def euclidean_signs(self) -> dict[str, int]:
        """Signs of the invariants in the Euclidean region.

        Raises
        ------
        UnfinishedError
            If the family has no Euclidean region.
        """
        if not self.is_euclidean():
            raise UnfinishedError(
                f"{self.definition.name} has no Euclidean region: no signs of its invariants make F "
                "positive; `evaluate --at` gives values in a physical region"
            )
        return self.signs()

    def solved_form(self) -> EpsilonForm:
        """The epsilon-form of the whole system; the masters themselves where there is no ratio.

        Raises
        ------
        ObstructionError
            If some block has none.
        """
        if len(self.definition.invariants) <= 1:
            return trivial_form(len(self.masters().masters))
        found = self.epsilon_form()
        if isinstance(found, Obstructed):
            reasons = "; ".join(
                f"{', '.join(self.label(i) for i in o.rows)}: {o.reason}" for o in found.obstructions
            )
            raise ObstructionError(f"{self.definition.name} has no epsilon-form: {reasons}")
        return found

    def ratio_form(self) -> EpsilonForm:
        """The epsilon-form in the plain ratios, where the usual one is in other variables.

        In the usual variables square roots are rational, as polylogarithms want it, but most points of the
        invariants have irrational images. In the ratios the form keeps its roots, and every point is
        rational: values are taken there.

        Raises
        ------
        ObstructionError
            If some block has none.
        """

        def compute() -> Outcome:
            plain = ratio_coordinates(self.derivation().system, self.signs())
            return outcome_of(factorise(self.connection_in(plain), self.primes, SEED, self.progress))

        found = self.kept("epsilon-form in the ratios", Outcome, None, compute).form
        if found is None:
            raise ObstructionError(f"{self.definition.name} has no epsilon-form in its ratios")
        return found

    def ratio_boundary(self, weight: int) -> Boundary:
        """Boundary constants of that form, all of them derived.

        Raises
        ------
        UnfinishedError
            If the region is not Euclidean, there is no form, or constants stay open.
        """

        def compute() -> Boundary:
            if not self.is_euclidean():
                raise UnfinishedError(
                    "boundary constants of a form in ratios that keeps roots need a Euclidean region"
                )
            masters, form, signs = self.masters().masters, self.ratio_form(), self.euclidean_signs()
            problem = problem_in_ratios(self.definition, masters, form, signs, weight)
            if weight > 0:
                problem = replace(problem, start=self.ratio_boundary(0).start)
            return fix_constants(problem, progress=self.progress)

        return self.kept("boundary in the ratios", Boundary, weight, compute)

    def boundary(self, weight: int, corner: Corner = ()) -> Boundary:
        """Boundary constants through ``eps^weight`` of the canonical functions, all of them derived.

        `corner` names the ratios, the smallest first; empty for the usual one.
        """

        def compute() -> Boundary:
            form = self.solved_form()
            self.progress.stage("boundary constants")
            if form.variables:
                if self.left_euclidean_region():
                    try:
                        return self._continued(form, weight, corner)
                    except UnfinishedError as error:
                        self.progress.stage(f"conditions in the region itself ({error})")
                problem = self.boundary_problem(form, weight, corner)
                return fix_constants(problem, progress=self.progress)
            if corner:
                listed = ", ".join(corner)
                raise InputError(
                    f"{self.definition.name} has no ratio, so no order {listed} of its variables"
                )
            masters, signs = self.masters().masters, self.euclidean_signs()
            return boundary_of_series(one_scale_values(self.definition, masters, signs, weight))

        return self.kept("boundary", Boundary, [weight, *corner] if corner else weight, compute)

    def _continued(self, form: EpsilonForm, weight: int, corner: Corner) -> Boundary:
        """The boundary constants of the Euclidean region, its invariants turned to those of this one."""
        plain = self.in_euclidean_region()
        if not (self.in_ratios() and plain.in_ratios()):
            raise UnfinishedError("constants are continued to a region in its ratios only")
        known, masters = plain.boundary(weight, corner), self.masters().masters
        signs = plain.signs(), self.signs()
        return continued(known, plain.solved_form(), form, self.definition, masters, *signs)

    def boundary_problem(self, form: EpsilonForm, weight: int, corner: Corner = ()) -> BoundaryProblem:
        """What the boundary constants through ``eps^weight`` follow from; see `boundary`."""
        values, masters = self.coordinates().values, self.masters().masters
        problem = problem_in_variables(self.definition, masters, form, values, weight, self.is_euclidean())
        problem = replace(problem, corner=corner or problem.corner)
        if weight <= 0:
            return problem
        # where the functions begin is seen at the first orders, and saves transports of high order
        try:
            return replace(problem, start=self.boundary(0).start)
        except UnfinishedError:
            return problem

    def order_of_weight(self, weight: int) -> int:
        """The power of eps at which what is solved for has this weight.

        Canonical functions begin at ``eps^0`` with weight 0. Masters without a ratio stand for themselves:
        the weight at ``eps^k`` is at most 2 L + k.
        """
        return weight if len(self.definition.invariants) > 1 else weight - 2 * len(self.definition.loops)

    def heaviness(self) -> int:
        """Weight by which what is solved for may exceed the order in eps: that of factors ``Gamma(1/2)``."""
        return self.boundary_problem(self.solved_form(), 0).heaviness
