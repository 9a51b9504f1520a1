"""The tape: a recorded elimination, ready to be replayed at any point modulo any prime."""

from __future__ import annotations

import hashlib
from collections.abc import Mapping
from dataclasses import dataclass, fields, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from ibpred.errors import StoreError

FORMAT = 1

Ints = NDArray[np.int32]
Longs = NDArray[np.int64]


@dataclass(frozen=True)
class Tape:
    """A straight-line program over blocks ("slots") that gives reductions of wanted columns.

    Every slot holds one residue for each sample point. Work goes in levels: level l first replaces a
    batch of values by minus their inverses, then forms sums ``scale * (units + products)``.

    Attributes
    ----------
    variables
        Names, in the order of a sample point.
    wanted
        The wanted columns.
    masters
        The columns without pivot in which they are expressed, ascending.
    outputs
        int32 (n_out, 2): (index into `wanted`, index into `masters`) of each output; pairs that do not
        occur are zero.
    output_slot
        int32 (n_out,): where each output is at the end; -1 for the constant one.
    slots
        Number of slots; inputs come first.
    blocks, monomial_products, input_start, input_monomial, input_value
        How inputs are evaluated: scratch blocks, products that give the monomials, and the integer
        polynomials in CSR form (block of monomial, factor).
    level_start
        int32 (levels + 1,): sums of each level.
    batch_start
        int32 (levels + 1,): inversions of each level.
    inverse_source, inverse_target
        Slots of the inversions.
    target, scale
        Slot of each sum's result, slot of its factor or -1.
    unit_start, unit
        Slots added as they are, in CSR form.
    product_start, product
        Pairs of slots multiplied, in CSR form, (products, 2).
    """

    variables: tuple[str, ...]
    wanted: tuple[int, ...]
    masters: tuple[int, ...]
    outputs: Ints
    output_slot: Ints
    slots: int
    blocks: int
    monomial_products: Ints
    input_start: Longs
    input_monomial: Ints
    input_value: Longs
    level_start: Ints
    batch_start: Ints
    inverse_source: Ints
    inverse_target: Ints
    target: Ints
    scale: Ints
    unit_start: Ints
    unit: Ints
    product_start: Ints
    product: Ints

    @property
    def multiply_adds(self) -> int:
        """Terms worked on per point: products, single summands, factors of sums."""
        return len(self.product) + len(self.unit) + int(np.count_nonzero(self.scale >= 0))

    @property
    def inversions(self) -> int:
        return len(self.inverse_source)

    @property
    def inputs(self) -> int:
        return len(self.input_start) - 1

    @property
    def sums(self) -> int:
        return len(self.target)

    @property
    def levels(self) -> int:
        return len(self.level_start) - 1

    def relabelled(self, columns: NDArray[np.int32]) -> Tape:
        """The same tape with column c named ``columns[c]`` (ascending map)."""
        return replace(
            self,
            wanted=tuple(int(columns[c]) for c in self.wanted),
            masters=tuple(int(columns[c]) for c in self.masters),
        )

    def to_arrays(self) -> dict[str, NDArray[Any]]:
        """Plain arrays for saving, with format version and digest; variable names as UTF-8 bytes."""
        arrays: dict[str, NDArray[Any]] = {"format": np.array([FORMAT], np.int64)}
        for field in fields(self):
            value = getattr(self, field.name)
            if field.name == "variables":
                arrays[field.name] = np.frombuffer("\n".join(value).encode(), np.uint8)
            elif isinstance(value, np.ndarray):
                arrays[field.name] = value
            else:
                arrays[field.name] = np.array(value, np.int64).reshape(-1)
        arrays["digest"] = np.frombuffer(_digest(arrays), np.uint8)
        return arrays

    def digest(self) -> str:
        """Hexadecimal digest of the tape's contents."""
        return bytes(self.to_arrays()["digest"]).hex()

    @classmethod
    def from_arrays(cls, arrays: Mapping[str, NDArray[Any]]) -> Tape:
        """The tape from its arrays.

        Raises
        ------
        StoreError
            If the format is unknown, something is missing, or the digest does not fit.
        """
        names = {field.name for field in fields(cls)}
        missing = sorted((names | {"format", "digest"}) - set(arrays))
        if missing:
            raise StoreError(f"a stored tape lacks {', '.join(missing)}; delete it and record anew")
        version = int(arrays["format"][0])
        if version != FORMAT:
            raise StoreError(f"a stored tape has format {version}, this program reads {FORMAT}; record anew")
        content = {name: arrays[name] for name in (*names, "format")}
        if bytes(np.asarray(arrays["digest"], np.uint8)) != _digest(content):
            raise StoreError("a stored tape is damaged (its digest differs); delete it and record anew")
        text = bytes(np.asarray(arrays["variables"], np.uint8)).decode()
        values: dict[str, Any] = {name: arrays[name] for name in names}
        values["variables"] = tuple(text.split("\n")) if text else ()
        for name in ("wanted", "masters"):
            values[name] = tuple(int(c) for c in arrays[name])
        for name in ("slots", "blocks"):
            values[name] = int(arrays[name][0])
        return cls(**values)


def _digest(arrays: Mapping[str, NDArray[Any]]) -> bytes:
    state = hashlib.sha256()
    for name in sorted(arrays):
        if name == "digest":
            continue
        array = np.ascontiguousarray(arrays[name])
        # little-endian bytes, so that the digest is the same on every machine
        array = array.astype(array.dtype.newbyteorder("<"))
        state.update(f"{name}:{array.dtype.str}:{array.shape}\n".encode())
        state.update(array.tobytes())
    return state.digest()
