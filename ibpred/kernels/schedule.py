"""From numbered values to an order of work in few slots: dead values, levels, reuse of slots."""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

from ibpred.kernels.numbering import INPUT, INVERSE, SUM, UNIT


@njit(cache=True)
def live_levels(kind: Any, scale: Any, node_start: Any, left: Any, right: Any, outputs: Any) -> Any:
    """Level of each value: inversions on the longest way to it; -1 for a value no output needs."""
    nodes = kind.shape[0]
    live = np.zeros(nodes, np.uint8)
    for i in range(outputs.shape[0]):
        live[outputs[i]] = 1
    for node in range(nodes - 1, -1, -1):
        if live[node]:
            if scale[node] >= 0:
                live[scale[node]] = 1
            for e in range(node_start[node], node_start[node + 1]):
                if left[e] != UNIT:
                    live[left[e]] = 1
                live[right[e]] = 1
    level = np.full(nodes, -1, np.int32)
    for node in range(nodes):
        if not live[node]:
            continue
        deepest = 0
        if scale[node] >= 0:
            deepest = level[scale[node]]
        if kind[node] == INVERSE:
            deepest += 1
        for e in range(node_start[node], node_start[node + 1]):
            if left[e] != UNIT:
                deepest = max(deepest, level[left[e]])
            deepest = max(deepest, level[right[e]])
        level[node] = deepest
    return level


@njit(cache=True)
def assign_slots(  # type: ignore[no-untyped-def]
    order,
    kind,
    scale,
    node_start,
    left,
    right,
    outputs,
):
    """Slots for the values in working order; a slot is reused after the last use of its value.

    Inputs come first in the order and keep their slots, as outputs do. The sources of a batch of
    inversions (consecutive in the order) stay until the batch is done.

    Returns
    -------
    slot
        int32 per value, -1 for dead ones.
    slots
        Number of slots.
    """
    nodes = kind.shape[0]
    forever = order.shape[0] + 1
    last = np.full(nodes, -1, np.int64)
    batch_end = order.shape[0]
    ends = np.empty(order.shape[0], np.int64)
    for k in range(order.shape[0] - 1, -1, -1):
        if kind[order[k]] != INVERSE:
            batch_end = k
            ends[k] = k
        else:
            ends[k] = batch_end - 1
    for k in range(order.shape[0]):
        node = order[k]
        when = ends[k]
        if scale[node] >= 0:
            last[scale[node]] = max(last[scale[node]], when)
        for e in range(node_start[node], node_start[node + 1]):
            if left[e] != UNIT:
                last[left[e]] = max(last[left[e]], when)
            last[right[e]] = max(last[right[e]], when)
        if kind[node] == INPUT:
            last[node] = forever
    for i in range(outputs.shape[0]):
        last[outputs[i]] = forever
    slot = np.full(nodes, -1, np.int32)
    free = np.empty(order.shape[0] + 1, np.int32)
    available = 0
    slots = 0
    pending = 0
    for k in range(order.shape[0]):
        node = order[k]
        if kind[node] == SUM:
            # operands are read before the result is written, so they may give up their slots first
            available = _release(node, k, last, scale, node_start, left, right, slot, free, available)
        if available > 0:
            available -= 1
            slot[node] = free[available]
        else:
            slot[node] = slots
            slots += 1
        if kind[node] == INVERSE and ends[k] == k:
            for j in range(pending, k + 1):
                available = _release(order[j], k, last, scale, node_start, left, right, slot, free, available)
        if kind[node] != INVERSE:
            pending = k + 1
    return slot, slots


@njit(cache=True)
def _release(  # type: ignore[no-untyped-def]
    node, now, last, scale, node_start, left, right, slot, free, available
):
    other = scale[node]
    if other >= 0 and last[other] == now:
        last[other] = -1
        free[available] = slot[other]
        available += 1
    for e in range(node_start[node], node_start[node + 1]):
        other = left[e]
        if other != UNIT and last[other] == now:
            last[other] = -1
            free[available] = slot[other]
            available += 1
        other = right[e]
        if last[other] == now:
            last[other] = -1
            free[available] = slot[other]
            available += 1
    return available
