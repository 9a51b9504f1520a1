"""Replay of a tape at sample points, and its validation against a fresh elimination."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from ibpred.elimination.discovery import discover, reduced
from ibpred.elimination.system import SparseSystem
from ibpred.elimination.table import aligned_blocks, check_points, check_prime
from ibpred.elimination.tape import Tape
from ibpred.kernels.arithmetic import to_residues
from ibpred.kernels.replay import replay_batches


def replay(
    tape: Tape, points: NDArray[np.uint64], prime: int
) -> tuple[NDArray[np.uint64], NDArray[np.bool_]]:
    """Outputs of a tape at many sample points modulo a prime.

    Parameters
    ----------
    tape
        The tape.
    points
        uint64 (variables, B).
    prime
        An odd prime below 2**49.

    Returns
    -------
    values
        uint64 (n_out, B), canonical residues; without meaning in lanes that are not good.
    good
        bool (B,): False where a pivot vanishes.

    Raises
    ------
    InputError
        If the modulus is no such prime or the points do not fit the variables.
    """
    prime = check_prime(prime)
    balanced = check_points(points, len(tape.variables), prime)
    count = balanced.shape[1]
    values = np.empty((len(tape.outputs), count), np.uint64)
    good = np.empty(count, np.bool_)
    replay_batches(
        balanced,
        aligned_blocks(tape.blocks),
        aligned_blocks(tape.slots),
        tape.monomial_products,
        tape.input_start,
        tape.input_monomial,
        to_residues(tape.input_value, prime),
        tape.level_start,
        tape.target,
        tape.scale,
        tape.unit_start,
        tape.unit,
        tape.product_start,
        tape.product,
        tape.batch_start,
        tape.inverse_source,
        tape.inverse_target,
        tape.output_slot,
        values,
        good,
        float(prime),
    )
    return values, good


def check_tape(system: SparseSystem, tape: Tape, point: Sequence[int], prime: int) -> bool:
    """Whether a tape agrees with a fresh elimination of the system at another point and prime.

    The system may be the one the tape was recorded from, before or after pruning, as long as the
    tape's columns are columns of this system.

    Returns
    -------
    False where masters or values differ or a pivot of the tape vanishes at the point.
    """
    truth = reduced(discover(system, point, prime), tape.wanted)
    column = np.array([[int(x) % prime] for x in point], np.uint64).reshape(len(tape.variables), 1)
    values, good = replay(tape, column, prime)
    if not good[0]:
        return False
    known = {c: k for k, c in enumerate(tape.masters)}
    if any(c not in known for c in truth.masters):
        return False
    ours = np.zeros((len(tape.wanted), len(tape.masters)), np.uint64)
    ours[tape.outputs[:, 0], tape.outputs[:, 1]] = values[:, 0]
    theirs = np.zeros_like(ours)
    theirs[:, [known[c] for c in truth.masters]] = truth.values
    return bool(np.array_equal(ours, theirs))
