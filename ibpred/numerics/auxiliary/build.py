"""Build the plan of a family at a point: enlarge, reduce, look at the regions, recurse."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction

from ibpred.boundary.gamma import GammaForm, gamma_form
from ibpred.errors import BoundaryError, ReconstructionError, UnfinishedError
from ibpred.exact.rational import Rational
from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.identities.derivatives import derivative_templates
from ibpred.identities.quantities import Quantity, template_at
from ibpred.numerics.auxiliary.bases import SMOOTH, dotted_integrals, dotted_masters, roughness
from ibpred.numerics.auxiliary.families import MASS, at_point, check_lines, restricted, with_mass
from ibpred.numerics.auxiliary.infinity import at_infinity, undetermined
from ibpred.numerics.auxiliary.plan import (
    AuxiliaryPlan,
    Combination,
    Condition,
    Flow,
    Node,
    Part,
    Row,
    Term,
)
from ibpred.numerics.auxiliary.regions import Region, regions, vacuum
from ibpred.progress import SILENT, Progress
from ibpred.reduction.deck import PLAIN_DECK, Deck
from ibpred.reduction.masters import find_masters
from ibpred.reduction.recording import coefficients, record_quantities
from ibpred.reduction.wanted import single
from ibpred.sectors.analysis import SectorAnalysis, analyse
from ibpred.sectors.order import lines_of, sector_of

_TRIAL = Fraction(1, 1009)  # an eps without meaning, at which ranks are looked at
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
        Its lines that are no numerators must be given by momenta.
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
    builder = _Builder(primes, seed, deck, progress, len(family.loops))
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

    def __init__(self, primes: Sequence[int], seed: int, deck: Deck, progress: Progress, loops: int) -> None:
        self.primes = primes
        self.seed = seed
        self.deck = deck
        self.progress = progress
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
        rows = self._rows(family, analysis, place.masters, [single(family, powers) for powers in alive])
        for powers, row in zip(alive, rows, strict=True):
            found[powers] = tuple(Part(value, None, place.node, index) for index, value in row)
        return found

    def _place(self, family: FamilyDefinition, analysis: SectorAnalysis) -> _Place:
        key = _content(family)
        if key not in self.places:
            self.places[key] = self._new_place(family, analysis)
        return self.places[key]

    def _new_place(self, family: FamilyDefinition, analysis: SectorAnalysis) -> _Place:
        masters = find_masters(family, analysis, self.primes[0], self.seed, progress=self.progress).masters
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
                own = self._flow(family, analysis, left, values)
            left = [powers for powers in left if powers not in own]
        self.nodes.append(Node(None, tuple(values[powers] for powers in masters)))
        return _Place(family, analysis, masters, len(self.nodes) - 1)

    def _rows(
        self,
        family: FamilyDefinition,
        analysis: SectorAnalysis,
        masters: Sequence[Powers],
        quantities: Sequence[Quantity],
    ) -> list[Row]:
        recorded = record_quantities(
            family, analysis, masters, quantities, self.primes, self.seed, self.deck, self.progress
        )
        values, _, _ = coefficients(family, recorded, self.primes, self.seed, self.deck, self.progress)
        rows: list[list[tuple[int, Rational]]] = [[] for _ in quantities]
        for (quantity, master), value in sorted(values.items(), key=lambda item: item[0]):
            rows[quantity].append((master, value))
        return [tuple(row) for row in rows]

    # -- families with the mass ------------------------------------------------------------------
    def _flow(
        self,
        family: FamilyDefinition,
        analysis: SectorAnalysis,
        wanted: Sequence[Powers],
        values: dict[Powers, Combination],
    ) -> list[Powers]:
        """Values of integrals of a family by a flow, as far as they contain its massive line."""
        failures = []
        for heavy, enlarged, with_eta, masters in self._choices(family, analysis):
            own = [powers for powers in wanted if powers[heavy] > 0]
            try:
                flow = self._smooth_flow(family, heavy, enlarged, with_eta, masters, own)
                flow = self._determined(flow, family, heavy, enlarged, with_eta)
            except (ReconstructionError, BoundaryError, UnfinishedError) as error:
                failures.append(f"{family.lines[heavy].text}: {error}")
                continue
            self.nodes.append(Node(flow))
            one = family.internal_ring.one
            node = len(self.nodes) - 1
            for index, powers in enumerate(own):
                values[powers] = (Part(one, None, node, index),)
            return own
        raise UnfinishedError(f"{family.name}: no line can carry the auxiliary mass; " + "; ".join(failures))

    def _choices(
        self, family: FamilyDefinition, analysis: SectorAnalysis
    ) -> Iterator[tuple[int, FamilyDefinition, SectorAnalysis, tuple[Powers, ...]]]:
        """Lines for the mass, one of those that a symmetry takes to each other, few masters first."""
        found = []
        for heavy in _inequivalent_lines(family, analysis):
            enlarged = with_mass(family, heavy)
            with_eta = analyse(enlarged)
            masters = find_masters(enlarged, with_eta, self.primes[0], self.seed, progress=self.progress)
            found.append((len(masters.masters), heavy, enlarged, with_eta, masters.masters))
        for _, heavy, enlarged, with_eta, powers in sorted(found, key=lambda item: item[:2]):
            yield heavy, enlarged, with_eta, powers

    def _smooth_flow(
        self,
        family: FamilyDefinition,
        heavy: int,
        enlarged: FamilyDefinition,
        analysis: SectorAnalysis,
        masters: tuple[Powers, ...],
        wanted: Sequence[Powers],
    ) -> Flow:
        """The differential equations of the better of two bases, without conditions yet."""
        numerators: Flow | ReconstructionError
        try:
            numerators = self._derived(family, heavy, enlarged, analysis, masters, wanted)
            rough = roughness(numerators, _TRIAL)
            if rough < SMOOTH:
                return numerators
        except ReconstructionError as error:
            numerators = error
        dotted = dotted_masters(enlarged, analysis, masters, self.primes, self.seed, self.progress)
        if isinstance(numerators, ReconstructionError):
            return self._derived(family, heavy, enlarged, analysis, dotted, wanted)
        if dotted == masters:
            return numerators
        try:
            other = self._derived(family, heavy, enlarged, analysis, dotted, wanted)
        except ReconstructionError:
            return numerators
        return other if roughness(other, _TRIAL) < rough else numerators

    def _derived(
        self,
        family: FamilyDefinition,
        heavy: int,
        enlarged: FamilyDefinition,
        analysis: SectorAnalysis,
        masters: tuple[Powers, ...],
        wanted: Sequence[Powers],
    ) -> Flow:
        template = derivative_templates(enlarged)[MASS]
        derivatives = [template_at(template, powers) for powers in masters]
        targets = [single(enlarged, powers) for powers in wanted]
        rows = self._rows(enlarged, analysis, masters, [*derivatives, *targets])
        matrix = tuple(
            (row, column, value) for row, line in enumerate(rows[: len(masters)]) for column, value in line
        )
        return Flow(
            family.name,
            family.lines[heavy].text,
            family.dimension,
            masters,
            matrix,
            (),
            tuple(rows[len(masters) :]),
        )

    def _determined(
        self,
        flow: Flow,
        family: FamilyDefinition,
        heavy: int,
        enlarged: FamilyDefinition,
        analysis: SectorAnalysis,
    ) -> Flow:
        """The flow with as many conditions at infinity as its solution needs."""
        masters = flow.masters
        places = regions(family, heavy)
        one = enlarged.internal_ring.one
        own = {powers: ((index, one),) for index, powers in enumerate(masters)}
        flow = self._with_conditions(flow, family, heavy, places, own)
        done = set(own)
        for dots in range(_DOTS + 1):
            if not undetermined(at_infinity(flow, _TRIAL, self.loops)):
                return flow
            more = [p for p in _dotted(masters, dots) if p not in done]
            if not more:
                continue
            done.update(more)
            more_rows = self._rows(enlarged, analysis, masters, [single(enlarged, p) for p in more])
            extra = dict(zip(more, more_rows, strict=True))
            flow = self._with_conditions(flow, family, heavy, places, extra)
        open_ = undetermined(at_infinity(flow, _TRIAL, self.loops))
        if open_:
            raise BoundaryError(f"{open_} constants at infinite auxiliary mass stay open")
        return flow

    def _with_conditions(
        self,
        flow: Flow,
        family: FamilyDefinition,
        heavy: int,
        places: Sequence[Region],
        rows: Mapping[Powers, Row],
    ) -> Flow:
        """Add the behaviour of integrals at large mass, where it is simple."""
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


def _inequivalent_lines(family: FamilyDefinition, analysis: SectorAnalysis) -> list[int]:
    """One line of each orbit under the symmetries of the sector of all lines."""
    everything = sum(1 << i for i in family.propagators)
    inside = lines_of(everything)
    first = {line: line for line in inside}
    for map_ in analysis.maps:
        if map_.source == map_.target == everything:
            for line, image in zip(inside, map_.lines, strict=True):
                low, high = sorted((first[line], first[image]))
                first = {key: low if value == high else value for key, value in first.items()}
    return sorted(set(first.values()))


def _dotted(masters: Sequence[Powers], dots: int) -> list[Powers]:
    """Integrals of the masters' sectors with so many dots and no numerators."""
    sectors = dict.fromkeys(sector_of(powers) for powers in masters)
    return [powers for sector in sectors for powers in dotted_integrals(sector, len(masters[0]), dots)]


def _content(family: FamilyDefinition) -> tuple[object, ...]:
    """What makes families equal: lines, kinematics, dimension."""
    lines = tuple((line.momentum, str(line.constant), line.numerator, line.linear) for line in family.lines)
    gram = tuple(str(value) for row in family.gram for value in row)
    return family.dimension, len(family.loops), gram, lines
