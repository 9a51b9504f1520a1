"""Build the plan of a family at a point: enlarge, reduce, look at the regions, recurse."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction

from ibpred.boundary.behaviour.gamma import GammaForm, gamma_form
from ibpred.errors import BoundaryError, ReconstructionError, UnfinishedError
from ibpred.exact.rational import Rational
from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.numerics.auxiliary.bases import TRIAL, dotted_integrals
from ibpred.numerics.auxiliary.choice import places_for_mass, smooth_flow
from ibpred.numerics.auxiliary.curved import FLATNESS, has_linear_propagators
from ibpred.numerics.auxiliary.families import at_point, check_lines, restricted
from ibpred.numerics.auxiliary.infinity import at_infinity, undetermined
from ibpred.numerics.auxiliary.plan import (
    AuxiliaryPlan,
    Combination,
    Condition,
    Flow,
    Node,
    Part,
    Row,
    Straightening,
    Term,
)
from ibpred.numerics.auxiliary.reducer import Enlarged, Reducer
from ibpred.numerics.auxiliary.regions import Region, regions, vacuum
from ibpred.numerics.auxiliary.straighten import straightening
from ibpred.progress import SILENT, Progress
from ibpred.reduction.deck import PLAIN_DECK, Deck
from ibpred.reduction.wanted import single
from ibpred.sectors.analysis import SectorAnalysis, analyse
from ibpred.sectors.order import sector_of

_DOTS = 2  # most dots of the integrals that serve as further conditions


def auxiliary_plan(
    family: FamilyDefinition,
    point: Mapping[str, Fraction],
    wanted: Sequence[Powers],
    primes: Sequence[int],
    seed: int,
    deck: Deck = PLAIN_DECK,
    progress: Progress = SILENT,
) -> AuxiliaryPlan:
    """Everything exact that values of integrals at a point need.

    Parameters
    ----------
    family
        Its lines that are no numerators must be given by momenta, or be linear in the loop momenta.
    point
        Exact values of all invariants, Euclidean or physical.
    wanted
        Integrals of the family.
    primes, seed
        Engine primes and the seed of all random points.
    deck
        Where tapes are kept and played.
    progress
        Told about the parts of the work.

    Raises
    ------
    PointError
        If the point is incomplete or singular.
    UnfinishedError
        If the method does not apply, or a reduction fails.
    """
    check_lines(family)
    numeric = at_point(family, point)
    builder = _Builder(Reducer(primes, seed, deck, progress), len(family.loops))
    values = builder.values(numeric, [tuple(powers) for powers in wanted])
    return AuxiliaryPlan(
        family.name,
        family.dimension,
        len(family.loops),
        dict(point),
        tuple(tuple(powers) for powers in wanted),
        tuple(builder.nodes),
        values,
    )


@dataclass(frozen=True)
class _Place:
    """A family whose masters have a node."""

    family: FamilyDefinition
    analysis: SectorAnalysis
    masters: tuple[Powers, ...]
    node: int


class _Builder:
    """Collects the nodes; families met again are not done again."""

    def __init__(self, reducer: Reducer, loops: int) -> None:
        self.reducer = reducer
        self.loops = loops
        self.nodes: list[Node] = []
        self.places: dict[tuple[object, ...], _Place] = {}

    # -- families without the mass ---------------------------------------------------------------
    def values(self, family: FamilyDefinition, wanted: Sequence[Powers]) -> tuple[Combination, ...]:
        """Integrals of a family at a numeric point as combinations of node values."""
        found: dict[Powers, Combination] = {}
        one = family.internal_ring.one
        open_: list[Powers] = []
        for powers in wanted:
            form = gamma_form(family, powers)
            if form is not None:
                found[powers] = (Part(one, form),)
            else:
                open_.append(powers)
        union = 0
        for powers in open_:
            union |= sector_of(powers)
        if open_:
            found |= self._reduced(restricted(family, union), open_)
        return tuple(found[powers] for powers in wanted)

    def _reduced(self, family: FamilyDefinition, wanted: Sequence[Powers]) -> dict[Powers, Combination]:
        analysis = analyse(family)
        alive = [powers for powers in wanted if sector_of(powers) not in analysis.zero]
        found: dict[Powers, Combination] = dict.fromkeys(wanted, ())
        if not alive:
            return found
        place = self._place(family, analysis)
        quantities = [single(family, powers) for powers in alive]
        rows = self.reducer.rows(family, analysis, place.masters, quantities)
        for powers, row in zip(alive, rows, strict=True):
            found[powers] = tuple(Part(value, None, place.node, index) for index, value in row)
        return found

    def _place(self, family: FamilyDefinition, analysis: SectorAnalysis) -> _Place:
        key = _content(family)
        if key not in self.places:
            self.places[key] = self._new_place(family, analysis)
        return self.places[key]

    def _new_place(self, family: FamilyDefinition, analysis: SectorAnalysis) -> _Place:
        masters = self.reducer.masters(family, analysis)
        one = family.internal_ring.one
        values: dict[Powers, Combination] = {}
        for powers in masters:
            form = gamma_form(family, powers)
            if form is not None:
                values[powers] = (Part(one, form),)
        everything = sum(1 << i for i in family.propagators)
        left = [powers for powers in masters if powers not in values]
        while left:
            top = max((sector_of(powers) for powers in left), key=lambda s: (s.bit_count(), s))
            if top != everything:
                own = [powers for powers in left if sector_of(powers) & ~top == 0]
                values |= dict(zip(own, self.values(restricted(family, top), own), strict=True))
            else:
                own = self._flowing(family, analysis, left, values)
            left = [powers for powers in left if powers not in own]
        self.nodes.append(Node(values=tuple(values[powers] for powers in masters)))
        return _Place(family, analysis, masters, len(self.nodes) - 1)

    # -- families with the mass, or with curved lines ----------------------------------------------
    def _flowing(
        self,
        family: FamilyDefinition,
        analysis: SectorAnalysis,
        wanted: Sequence[Powers],
        values: dict[Powers, Combination],
    ) -> list[Powers]:
        """Values of integrals of a family, those of all lines among them, as the end of a flow."""
        if has_linear_propagators(family):
            own = list(wanted)
            node = Node(straightening=self._straightening(family, own))
        else:
            flow = self._flow(family, analysis, wanted)
            own = [powers for powers in wanted if powers[flow.place] > 0]
            node = Node(flow=flow)
        self.nodes.append(node)
        one = family.internal_ring.one
        for index, powers in enumerate(own):
            values[powers] = (Part(one, None, len(self.nodes) - 1, index),)
        return own

    def _straightening(self, family: FamilyDefinition, wanted: Sequence[Powers]) -> Straightening:
        open_ = straightening(self.reducer, family, wanted)
        start = at_point(open_.place.family, {FLATNESS: open_.start})
        return Straightening(
            family.name,
            family.dimension,
            open_.place.masters,
            open_.derived.matrix,
            open_.start,
            self.values(start, open_.place.masters),
            open_.derived.targets,
        )

    def _flow(self, family: FamilyDefinition, analysis: SectorAnalysis, wanted: Sequence[Powers]) -> Flow:
        failures = []
        for heavy, place in places_for_mass(self.reducer, family, analysis):
            own = [powers for powers in wanted if powers[heavy] > 0]
            try:
                flow, place = smooth_flow(self.reducer, family, heavy, place, own)
                return self._determined(flow, family, place)
            except (ReconstructionError, BoundaryError, UnfinishedError) as error:
                failures.append(f"{family.lines[heavy].text}: {error}")
        raise UnfinishedError(f"{family.name}: no line can carry the auxiliary mass; " + "; ".join(failures))

    def _determined(self, flow: Flow, family: FamilyDefinition, place: Enlarged) -> Flow:
        """The flow with as many conditions at infinity as its solution needs."""
        found = regions(family, flow.place)
        one = family.internal_ring.one
        own = {powers: ((index, one),) for index, powers in enumerate(place.masters)}
        flow = self._with_conditions(flow, family, found, own)
        done = set(own)
        for dots in range(_DOTS + 1):
            if not undetermined(at_infinity(flow, TRIAL, self.loops)):
                return flow
            more = [p for p in _dotted(place.masters, dots) if p not in done]
            if not more:
                continue
            done.update(more)
            quantities = [single(place.family, p) for p in more]
            more_rows = self.reducer.rows(place.family, place.analysis, place.masters, quantities)
            extra = dict(zip(more, more_rows, strict=True))
            flow = self._with_conditions(flow, family, found, extra)
        open_ = undetermined(at_infinity(flow, TRIAL, self.loops))
        if open_:
            raise BoundaryError(f"{open_} constants at infinite auxiliary mass stay open")
        return flow

    def _with_conditions(
        self,
        flow: Flow,
        family: FamilyDefinition,
        places: Sequence[Region],
        rows: Mapping[Powers, Row],
    ) -> Flow:
        """Add the behaviour of integrals at large mass, where it is simple."""
        heavy = flow.place
        simple = [powers for powers in rows if powers[heavy] == 0 or all(power >= 0 for power in powers)]
        terms: dict[Powers, list[Term]] = {powers: [] for powers in simple}
        for region in places:
            self._add_terms(terms, family, heavy, region)
        conditions = tuple(Condition(powers, rows[powers], tuple(terms[powers])) for powers in simple)
        return replace(flow, conditions=(*flow.conditions, *conditions))

    def _add_terms(
        self, terms: dict[Powers, list[Term]], family: FamilyDefinition, heavy: int, region: Region
    ) -> None:
        one = family.internal_ring.one
        inside: dict[Powers, tuple[Powers, Combination]] = {}
        for powers in terms:
            if region.loops == 0:
                soft = tuple(0 if i == heavy else power for i, power in enumerate(powers))
                inside[powers] = (soft, ())
                continue
            if powers[heavy] == 0:
                continue  # all loops of an integral without the massive line are soft
            hard: list[Part] = []
            for part in vacuum(family, heavy, region, powers):
                (value,) = self.values(part.family, [part.powers])
                hard += [replace(v, factor=v.factor * part.factor) for v in value]
            if hard:
                inside[powers] = (_soft_powers(region, powers), tuple(hard))
        if not inside:
            return
        if region.soft_family is None:
            soft_values: dict[Powers, Combination] = {}
        else:
            distinct = list(dict.fromkeys(soft for soft, _ in inside.values()))
            soft_values = dict(zip(distinct, self.values(region.soft_family, distinct), strict=True))
        for powers, (soft, hard_value) in inside.items():
            power = sum(powers[i] for i in region.hard)
            if region.loops == 0:
                value = soft_values[soft]
                if value:
                    terms[powers].append(Term(0, power, Fraction(1), _unit(one), value))
            elif region.soft_family is None:
                terms[powers].append(Term(region.loops, power, region.jacobian, hard_value, _unit(one)))
            elif soft_values[soft]:
                terms[powers].append(
                    Term(region.loops, power, region.jacobian, hard_value, soft_values[soft])
                )


def _unit(one: Rational) -> Combination:
    return (Part(one, GammaForm(0, Fraction(1), (), (), ())),)


def _soft_powers(region: Region, powers: Powers) -> Powers:
    if region.soft_family is None:
        return ()
    soft = [powers[i] for i in region.soft]
    return tuple(soft + [0] * (len(region.soft_family.lines) - len(soft)))


def _dotted(masters: Sequence[Powers], dots: int) -> list[Powers]:
    """Integrals of the masters' sectors with so many dots and no numerators."""
    sectors = dict.fromkeys(sector_of(powers) for powers in masters)
    return [powers for sector in sectors for powers in dotted_integrals(sector, len(masters[0]), dots)]


def _content(family: FamilyDefinition) -> tuple[object, ...]:
    """What makes families equal: lines, kinematics, dimension."""
    lines = tuple((line.momentum, str(line.constant), line.numerator, line.linear) for line in family.lines)
    gram = tuple(str(value) for row in family.gram for value in row)
    return family.dimension, len(family.loops), gram, lines
