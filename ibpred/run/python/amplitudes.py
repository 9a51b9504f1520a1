"""Sums of integrals as text: one ``coefficient * integral`` a line, ``#`` starts a comment."""

from __future__ import annotations

from collections.abc import Sequence

from ibpred.errors import ExpressionError, InputError
from ibpred.exact.rational import Rational
from ibpred.family.members import Member
from ibpred.identities.amplitude import Setting, parse_terms
from ibpred.identities.quantities import Integral
from ibpred.reduction.sums import Sum


def sum_of_text(text: str, source: str, members: Sequence[Member]) -> Sum:
    """The sum of the terms of all lines.

    Parameters
    ----------
    text
        The lines.
    source
        What they are from, for messages.
    members
        The families whose integrals may occur.

    Raises
    ------
    InputError
        If a line is no sum of integrals, or nothing is left.
    """
    setting = Setting([member.definition for member in members])
    total: dict[Integral, Rational] = {}
    for number, line in enumerate(text.splitlines(), start=1):
        content = line.split("#", 1)[0].rstrip()
        if not content.strip():
            continue
        try:
            terms = parse_terms(content, setting)
        except ExpressionError as error:
            raise InputError(f"{source}:{number}: {error}") from error
        for integral, value in terms.items():
            total[integral] = total[integral] + value if integral in total else value
    if not total:
        raise InputError(f"the sum {source} holds no term, or its terms cancel")
    return total
