"""Two forms of one system: rational variables with polylogarithms, ratios with square roots."""

from fractions import Fraction
from pathlib import Path

import flint
import pytest

from ibpred.balls.decimal import ball_of_decimal
from ibpred.progress import SILENT
from ibpred.run.chain.chain import Chain
from ibpred.run.storage.files import read_family_file
from ibpred.run.storage.store import Store
from ibpred.run.values.form_values import form_values
from ibpred.run.values.lifted_point import lifted_point

FAMILIES = Path(__file__).parents[2] / "families"


@pytest.mark.parametrize(
    "name",
    [
        "bubble-distinct-masses",
        "box-massive-loop",
        "triangle-massive-loop",
        pytest.param("box-two-adjacent-legs", marks=pytest.mark.slow),
        pytest.param("pentagon", marks=pytest.mark.slow),
    ],
)
def test_both_forms_give_the_same_values(name, tmp_path):
    # they share the differential equation; factorisation, constants, letters and path are different
    with Store(tmp_path) as store:
        chain = Chain(read_family_file(FAMILIES / f"{name}.toml"), store, SILENT, 1)
        assert not chain.in_ratios()
        assert not any(chain.solved_form().tags)
        assert any(chain.ratio_form().tags)
        known = lifted_point(chain, 1, 25)
        (found,) = form_values(chain, [known.point], (), 1, 25)
    assert sum(len(value.epsilon) for value in found) >= len(found)
    for value, other in zip(found, known.values, strict=True):
        assert value.certified
        for order in {*value.epsilon, *other}:
            left, right = (
                ball_of_decimal(v[order], 200) if order in v else flint.acb(0) for v in (value.epsilon, other)
            )
            assert left.overlaps(right)
            assert float(left.real.rad()) <= 1e-24 * max(1, abs(float(left.real.mid())))


def test_letters_that_vanish_on_the_way_only(tmp_path):
    # p2sq/s = 1 + t/s: the letter 1 + x - y - z vanishes while z = p4sq/s is still zero, not at the point;
    # the box does not change when p2 and p4 are exchanged, but the way does
    name = "box-two-opposite-legs"
    numbers = [("s", "-1"), ("t", "-1/3"), ("p2sq", "-4/3"), ("p4sq", "-1/5")]
    point = {invariant: Fraction(value) for invariant, value in numbers}
    turned = {**point, "p2sq": point["p4sq"], "p4sq": point["p2sq"]}
    with Store(tmp_path) as store:
        chain = Chain(read_family_file(FAMILIES / f"{name}.toml"), store, SILENT, 1)
        (one,), (other,) = form_values(chain, [point, turned], [(1, 1, 1, 1)], 0, 20)
    for order in (-1, 0):
        assert ball_of_decimal(one.epsilon[order], 200).overlaps(ball_of_decimal(other.epsilon[order], 200))
