"""Functions of definite parity under the exchange of the two sheets of a double cover."""

from __future__ import annotations

from synthetic_systems import connection, matrix

from ibpred.epsform.factorise import factorise, root_cover
from ibpred.epsform.form import EpsilonForm
from ibpred.epsform.roots.parity import involution, with_parity
from ibpred.epsform.verify import verify
from ibpred.exact.grammar import parse_rational
from ibpred.exact.primes import first_primes
from ibpred.exact.rational import ring

PRIMES = first_primes(20)
FIELD = ring(("eps", "w"))


def w(text: str):
    return parse_rational(text, FIELD)


def test_involutions() -> None:
    assert involution([w("(1-w)^2/w"), w("3")], "w") == w("1/w")
    assert involution([w("2+w^2")], "w") == w("-w")
    assert involution([w("w-1/w")], "w") == w("-1/w")
    assert involution([w("(1-w)^2/w"), w("w")], "w") is None
    assert involution([w("3")], "w") is None


def test_the_bubble_is_odd_and_the_tadpole_even() -> None:
    rows = [["0", "0"], ["2*(1-eps)/(x*(x+4))", "-(2+eps*x)/(x*(x+4))"]]
    cover = root_cover(connection(matrix(rows)), PRIMES, 1)
    assert cover is not None
    form = factorise(cover.connection, PRIMES, 1)
    assert isinstance(form, EpsilonForm)
    image = 1 / cover.connection.ring.variable("w")
    found = with_parity(form, "w", image)
    assert verify(cover.connection, found)
    for row, sign in zip(found.inverse, (1, -1), strict=True):
        assert all(entry.substitute({"w": image}) == entry * sign for entry in row)
    # odd functions couple to even ones by dlog(w) only, which is odd
    at = {str(letter): m for letter, m in zip(found.letters, found.matrices, strict=True)}
    assert at["w+1"][1][0] == 0
