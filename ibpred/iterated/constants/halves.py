"""Rigorous values of multiple zeta values, from fast nested sums at 1/2.

The path from 0 to 1 is cut at 1/2: ``I(w; 1) = sum_{w = v u} I(v from 1/2 to 1) I(u from 0 to 1/2)``, and
t -> 1 - t turns the first factor into a nested sum at 1/2 as well (path composition, Chen). Every sum
gains one bit a term.
"""

from __future__ import annotations

from collections.abc import Sequence

import flint

from ibpred.balls.context import RealBall, precision


def nested_sum_at_half(indices: Sequence[int], bits: int) -> RealBall:
    """Ball for ``sum_{n1 > ... > nk > 0} 2^(-n1) / (n1^s1 ... nk^sk)``.

    Parameters
    ----------
    indices
        s1, ..., sk, all at least 1; the empty tuple gives 1.
    bits
        Working precision.

    Returns
    -------
    flint.arb
        The radius includes the tail: the sum over n1 > N is at most
        ``4 * 2^-(N+1) * (N+1)^(k-1)`` for N >= 3 k.
    """
    depth = len(indices)
    if depth == 0:
        return flint.arb(1)
    terms = bits + 8 * depth + 3 * depth + 16
    # inner[j] = sum over the last j indices with all summation variables below n
    inner = [flint.arb(1)] + [flint.arb(0)] * depth
    powers = flint.arb(1)
    total = flint.arb(0)
    for n in range(1, terms + 1):
        powers = powers / 2
        total += powers * inner[depth - 1] / flint.arb(n) ** indices[0]
        for j in range(depth - 1, 0, -1):
            inner[j] = inner[j] + inner[j - 1] / flint.arb(n) ** indices[depth - j]
    tail = 4 * flint.arb(terms + 1) ** (depth - 1) * flint.arb(2) ** (-(terms + 1))
    return total + flint.arb(0, tail.upper())


def zeta_word_ball(word: Sequence[int], bits: int) -> RealBall:
    """Ball for the integral of a convergent word in the letters 0 and 1 from 0 to 1.

    Parameters
    ----------
    word
        Letters 0 and 1, leftmost outermost; the first is 0 and the last is 1.
    bits
        Working precision.
    """
    if not word or word[0] != 0 or word[-1] != 1:
        raise ValueError(f"the word {tuple(word)} is not convergent: it must start with 0 and end with 1")
    total = flint.arb(0)
    for cut in range(len(word) + 1):
        outer, inside = word[:cut], word[cut:]
        # t -> 1 - t reverses the path, swaps the letters, and each kernel keeps dt/(t - a)
        turned = tuple(1 - letter for letter in reversed(outer))
        sign = (-1) ** len(outer)
        total += sign * _half(turned, bits) * _half(inside, bits)
    return total


def _half(word: Sequence[int], bits: int) -> RealBall:
    indices: list[int] = []
    run = 1
    for letter in word:
        if letter == 0:
            run += 1
        else:
            indices.append(run)
            run = 1
    return (-1) ** len(indices) * nested_sum_at_half(indices, bits)


def multiple_zeta_ball(indices: Sequence[int], bits: int) -> RealBall:
    """Ball for ``zeta(s1, ..., sk) = sum_{n1 > ... > nk > 0} 1/(n1^s1 ... nk^sk)``, s1 >= 2."""
    word: list[int] = []
    for s in indices:
        word += [0] * (s - 1) + [1]
    with precision(bits):
        return (-1) ** len(indices) * zeta_word_ball(word, bits)
