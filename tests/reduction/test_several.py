"""Several families: shared masters, crossings, and reductions on cuts against the whole."""

from __future__ import annotations

from dataclasses import replace
from functools import cache
from pathlib import Path

import pytest

from ibpred.errors import InputError
from ibpred.exact.primes import first_primes
from ibpred.family.definition import FamilyDefinition
from ibpred.family.members import Member, members_of
from ibpred.family.reading import read_family
from ibpred.identities.rows import FamilyIdentities, family_identities
from ibpred.reduction.cuts import on_cut, reduce_by_cuts, sector_classes, spanning_cuts
from ibpred.reduction.masters import CommonMasters, find_common_masters, find_masters
from ibpred.reduction.several import reduce_together
from ibpred.reduction.table import reduce_integrals
from ibpred.sectors.analysis import analyse, analyse_together
from ibpred.sectors.order import sector_of

FAMILIES = Path(__file__).parents[2] / "families"
PRIMES = first_primes(20)
EXCHANGE = '[crossings]\nu = { p1 = "p2", p2 = "p1" }\nx = { p1 = "p3", p3 = "p1" }\n'


@cache
def text_of(name: str) -> str:
    return (FAMILIES / f"{name}.toml").read_text(encoding="utf-8")


def shipped(name: str, more: str = "") -> FamilyDefinition:
    return read_family(text_of(name) + more, f"{name}.toml", name)


@cache
def joined(
    *files: tuple[str, str],
) -> tuple[tuple[Member, ...], tuple[FamilyIdentities, ...], CommonMasters]:
    members = members_of([shipped(name, more) for name, more in files])
    definitions = [member.definition for member in members]
    identities = family_identities(definitions, analyse_together(definitions))
    roots = [i for i, member in enumerate(members) if member.crossing is None]
    return members, identities, find_common_masters(identities, roots, PRIMES[0], 1)


def test_form_factor_has_four_masters() -> None:
    """Planar and crossed massless two-loop form factor: Gonsalves, Phys. Rev. D28 (1983) 1542."""
    _, _, found = joined(("planar-vertex", ""), ("crossed-vertex", ""))
    names = [found.families[number] for number, _ in found.masters]
    assert names == ["planar-vertex"] * 3 + ["crossed-vertex"]
    assert found.masters[-1][1] == (1, 1, 1, 1, 1, 1, 0)
    assert found.trials[-1].count == found.trials[-2].count == 4


def test_three_loop_propagators_have_six_masters() -> None:
    """Planar ladder, benz and non-planar together: Chetyrkin, Tkachov, Nucl. Phys. B192 (1981) 159."""
    _, _, found = joined(
        ("propagator-planar-ladder", ""), ("propagator-benz", ""), ("propagator-non-planar", "")
    )
    assert len(found.masters) == 6
    assert {found.families[number] for number, _ in found.masters} == {
        "propagator-planar-ladder",
        "propagator-non-planar",
    }


def test_double_boxes_and_a_crossing() -> None:
    """Eight of the crossed box's twelve masters (Tausk, hep-ph/9909506) are planar, three of them in u."""
    more = '[crossings]\nu = { p1 = "p2", p2 = "p1" }\n'
    _, _, found = joined(("planar-double-box", more), ("crossed-double-box", ""))
    names = [found.families[number] for number, _ in found.masters]
    assert names.count("planar-double-box") == 8
    assert names.count("planar-double-box.u") == 3
    assert names.count("crossed-double-box") == 4
    assert len(names) == 15


def test_one_member_is_one_family() -> None:
    _, _, found = joined(("planar-vertex", ""))
    family = shipped("planar-vertex")
    alone = find_masters(family, analyse(family), PRIMES[0], 1)
    assert [powers for _, powers in found.masters] == list(alone.masters)


def test_joint_reduction_agrees_with_single_ones() -> None:
    """Where the masters' names agree so do the coefficients; shared ones carry the first family's name."""
    _, identities, found = joined(("planar-vertex", ""), ("crossed-vertex", ""))
    wanted = [(1, (1, 1, 1, 1, 1, 1, -1)), (1, (1, 1, 1, 1, 1, 0, 0)), (1, (1, 1, 2, 1, 1, 1, 0))]
    together = reduce_together(identities, wanted, found.masters, PRIMES, 3)
    family = shipped("crossed-vertex")
    analysis = analyse(family)
    own = find_masters(family, analysis, PRIMES[0], 1).masters
    alone = reduce_integrals(family, analysis, [powers for _, powers in wanted], own, PRIMES, 3)
    (crossed,) = (i for i, (number, _) in enumerate(found.masters) if number == 1)
    for integral in wanted:
        ours = dict(together.reductions[integral])
        theirs = {own[i]: value for i, value in alone.reductions[integral[1]]}
        assert ours.get(crossed) == theirs.get((1, 1, 1, 1, 1, 1, 0))
        values = sorted(str(v) for i, v in ours.items() if i != crossed)
        assert values == sorted(str(v) for p, v in theirs.items() if p != (1, 1, 1, 1, 1, 1, 0))


def test_crossed_integrals_are_integrals_at_crossed_invariants() -> None:
    members, identities, _ = joined(("massless-box", EXCHANGE))
    assert [member.definition.name for member in members] == [
        "massless-box",
        "massless-box.u",
        "massless-box.x",
    ]
    found = find_common_masters(identities, [0, 1, 2], PRIMES[0], 1)
    wanted = [(2, 1, 1, 1), (1, 2, 1, 1), (1, 1, 1, -1)]
    everything = [(i, powers) for i in range(3) for powers in wanted]
    table = reduce_together(identities, everything, found.masters, PRIMES, 5)
    family = members[0].definition
    ring = family.full_ring
    images = {"d": ring.variable("d")}
    images |= {
        name: value.to_ring(ring) for name, value in zip("st", family.crossings[0].invariants, strict=True)
    }
    channels = set()
    for powers in wanted:
        plain = {found.masters[i]: value for i, value in table.reductions[0, powers]}
        after = {found.masters[i]: value for i, value in table.reductions[1, powers]}
        moved = {}
        for (_, master), value in plain.items():
            # the s-channel bubble is its own crossing, the t-channel one and the box are new
            owner = 0 if master == (1, 0, 1, 0) else 1
            moved[owner, master] = value.substitute(images)
        assert after == moved
        channels |= set(after)
        # exchanging s and t is a symmetry of the box: nothing new
        assert {table.masters[i][0] for i, _ in table.reductions[2, powers]} <= {0}
    assert channels == {(0, (1, 0, 1, 0)), (1, (0, 1, 0, 1)), (1, (1, 1, 1, 1))}


def test_roots_decide_what_is_found() -> None:
    _, identities, found = joined(("massless-box", EXCHANGE))
    assert len(found.masters) == 3
    # s-, t-, u-channel bubbles and two boxes
    assert len(find_common_masters(identities, [0, 1, 2], PRIMES[0], 1).masters) == 5
    assert len(find_common_masters(identities, [1], PRIMES[0], 1).masters) == 3


@pytest.mark.parametrize(
    ("files", "wanted"),
    [
        (
            (("massless-box", ""),),
            [(0, (2, 1, 1, 1)), (0, (1, 2, 1, 0)), (0, (1, 1, 1, 1)), (0, (1, 1, 0, 0))],
        ),
        (
            (("sunrise-equal-masses", ""),),
            [(0, (2, 2, 1, 0, 0)), (0, (1, 1, 1, -1, -1)), (0, (2, 1, 0, 0, 0))],
        ),
        (
            (("planar-vertex", ""), ("crossed-vertex", "")),
            [(0, (1, 1, 1, 1, 1, 1, -1)), (1, (1, 1, 1, 1, 1, 1, -1)), (1, (1, 1, 1, 1, 1, 0, 0))],
        ),
        (
            (("planar-double-box", ""),),
            [(0, (1, 1, 1, 1, 1, 1, 1, -1, -1)), (0, (1, 1, 1, 1, 0, 1, 1, 0, -1))],
        ),
    ],
    ids=["box", "sunrise", "vertices", "double-box"],
)
def test_cuts_give_the_same_table(files, wanted) -> None:
    _, identities, found = joined(*files)
    whole = reduce_together(identities, wanted, found.masters, PRIMES, 3)
    parts = reduce_by_cuts(identities, wanted, found.masters, PRIMES, 3)
    assert parts.reductions == whole.reductions
    assert list(parts.reductions) == list(whole.reductions)
    assert parts.masters == whole.masters
    assert all(part.rows < whole.effort[0].rows for part in parts.effort) or len(parts.effort) == 1


def test_spanning_cuts_of_the_double_box() -> None:
    """Two sunrises (s and t), two bubbles, and the diagonal box's sunrise with a bubble."""
    _, identities, found = joined(("planar-double-box", ""))
    cuts = spanning_cuts(identities, found.masters)
    classes = sector_classes(identities)
    for cut in cuts:
        (any_place, *_) = cut.sectors
        assert cut.sectors == classes[any_place]
    for number, powers in found.masters:
        assert any(cut.keeps((number, sector_of(powers))) for cut in cuts)
    for a in cuts:
        assert not any(b.keeps(place) for b in cuts if b != a for place in a.sectors)
    on = on_cut(identities, cuts[0])
    assert set(on[0].analysis.nonzero) < set(identities[0].analysis.nonzero)


def test_cut_lines_of_the_file_drop_masters() -> None:
    """With a cut in the file the table is the one without, less the masters that lack the line."""
    family = shipped("box-one-leg")
    lines = tuple(replace(line, cut=number == 0) for number, line in enumerate(family.lines))
    cut = replace(family, lines=lines)
    wanted = [(2, 1, 1, 1), (1, 1, 2, 0), (0, 1, 1, 1), (1, 1, 1, -1)]
    tables = []
    for each in (family, cut):
        analysis = analyse(each)
        masters = find_masters(each, analysis, PRIMES[0], 1).masters
        tables.append((masters, reduce_integrals(each, analysis, wanted, masters, PRIMES, 1)))
    (whole, full), (kept, on) = tables
    assert set(kept) == {m for m in whole if m[0] > 0}
    for powers in wanted:
        expected = {whole[i]: v for i, v in full.reductions[powers] if whole[i][0] > 0}
        assert {kept[i]: v for i, v in on.reductions[powers]} == expected
    assert on.reductions[0, 1, 1, 1] == ()


def test_families_that_do_not_fit() -> None:
    box, vertex = shipped("massless-box"), shipped("planar-vertex")
    with pytest.raises(InputError, match="the numbers of loops differ, 1 and 2"):
        members_of([box, vertex])
    with pytest.raises(InputError, match="the external momenta differ"):
        members_of([box, shipped("bubble")])
    with pytest.raises(InputError, match="the invariants differ"):
        members_of([box, shipped("box-one-leg")])
    with pytest.raises(InputError, match="the dimensions differ, 4 and 6"):
        members_of([box, replace(box, name="other", dimension=6)])
    with pytest.raises(InputError, match="the units differ, s and t"):
        members_of([box, replace(box, name="other", unit="t")])
    with pytest.raises(InputError, match="two families are called massless-box"):
        members_of([box, box])
    other = replace(box, name="other", gram=tuple(tuple(-x for x in row) for row in box.gram))
    with pytest.raises(InputError, match=r"the products p1\*p2 differ"):
        members_of([box, other])


def test_wrong_masters_are_refused() -> None:
    _, identities, found = joined(("massless-box", ""))
    with pytest.raises(InputError, match="no masters are given"):
        reduce_together(identities, [(0, (1, 1, 1, 1))], [], PRIMES, 1)
    with pytest.raises(InputError, match="listed twice"):
        reduce_together(identities, [(0, (1, 1, 1, 1))], [found.masters[0]] * 2, PRIMES, 1)
    with pytest.raises(InputError, match="4 powers are needed"):
        reduce_by_cuts(identities, [(0, (1, 1, 1))], found.masters, PRIMES, 1)
