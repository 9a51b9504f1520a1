"""Every shipped family against direct integration, at the Euclidean point of `ibpred run`.

Direct integration (sector decomposition and randomised quasi-Monte Carlo) shares no code with the chain.
Where results are shipped, their masters with the most lines are compared, those without numerators if there
are such; elsewhere the integral of all lines, by the auxiliary mass. Lines linear in the loop momenta take
part: F is homogeneous with them as well.
"""

from __future__ import annotations

import json
from collections.abc import Mapping
from fractions import Fraction

import pytest
from solving import FAMILIES

from ibpred.exact.primes import first_primes
from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.family.signs import euclidean_signs
from ibpred.numerics.auxiliary.build import auxiliary_plan
from ibpred.numerics.auxiliary.laurent import auxiliary_values
from ibpred.numerics.direct import direct_value
from ibpred.run.storage.files import read_family_file
from ibpred.run.values.points import euclidean_point

SOLUTIONS = FAMILIES.parent / "solutions"
PRIMES = first_primes(40)
DIGITS = 6  # of the auxiliary mass
SIGMAS = 6

LEFT_OUT = {
    "crossed-double-box": "no Euclidean region: s + t + u = 0",
    "post-minkowskian-two-loop": "cut lines",
    "banana-four-loop": "its value is compared with Bessel moments, in the tests of the auxiliary mass",
    "banana-three-loop-distinct-masses": "no value from another route within a minute",
    "pentabox": "no value from another route within a minute",
}
NAMES = sorted(path.stem for path in FAMILIES.glob("*.toml"))


def is_heavy(name: str) -> bool:
    family = read_family_file(FAMILIES / f"{name}.toml")
    lines, loops = len(family.propagators), len(family.loops)
    return not (SOLUTIONS / name).exists() or loops >= 3 or (loops == 2 and lines >= 6)


def samples(family: FamilyDefinition) -> int:
    if len(family.loops) >= 3:
        return 60_000
    return 150_000 if len(family.propagators) >= 7 else 20_000


Laurent = Mapping[int, float]


def shipped(name: str) -> tuple[dict[str, Fraction], dict[Powers, Laurent]]:
    """The first point of a folder and the masters that are compared."""
    table = json.loads((SOLUTIONS / name / "values.json").read_text())["tables"][0]
    found = {
        tuple(integral["powers"]): {int(k): float(ball["re"]) for k, ball in integral["epsilon"].items()}
        for integral in table["integrals"]
    }
    most = max(sum(power > 0 for power in powers) for powers in found)
    top = {powers: value for powers, value in found.items() if sum(p > 0 for p in powers) == most}
    plain = {powers: value for powers, value in top.items() if min(powers) >= 0}
    return {key: Fraction(text) for key, text in table["point"].items()}, plain or top


def by_auxiliary_mass(family: FamilyDefinition) -> tuple[dict[str, Fraction], dict[Powers, Laurent]]:
    signs = euclidean_signs(family)
    assert signs is not None
    point = euclidean_point(family, signs)
    top = tuple(int(place in family.propagators) for place in range(len(family.lines)))
    (value,) = auxiliary_values(auxiliary_plan(family, point, [top], PRIMES, 1), 0, DIGITS)
    return point, {top: {k: float(ball.re) for k, ball in value.epsilon.items()}}


@pytest.mark.parametrize(
    "name",
    [
        pytest.param(name, marks=pytest.mark.slow) if is_heavy(name) else name
        for name in NAMES
        if name not in LEFT_OUT
    ],
)
def test_three_digits(name: str) -> None:
    family = read_family_file(FAMILIES / f"{name}.toml")
    point, known = shipped(name) if (SOLUTIONS / name).exists() else by_auxiliary_mass(family)
    for powers, expected in known.items():
        size = max(abs(value) for value in expected.values())
        found = direct_value(family, powers, point, max(expected), 7, samples(family))
        assert set(expected) <= set(found)
        for order, (number, error) in found.items():
            assert error < 1e-3 * size, (powers, order)
            wrong = abs(number - expected.get(order, 0.0))
            assert wrong < SIGMAS * error + 1e-9 * size, (powers, order, number, expected.get(order))


def test_what_is_left_out_is_so_for_its_reason() -> None:
    assert set(LEFT_OUT) <= set(NAMES)
    for name, reason in LEFT_OUT.items():
        family = read_family_file(FAMILIES / f"{name}.toml")
        if reason.startswith("no Euclidean"):
            assert euclidean_signs(family) is None
        elif reason == "cut lines":
            assert any(line.cut for line in family.lines)
        elif reason.startswith("no value"):
            assert not (SOLUTIONS / name).exists()
