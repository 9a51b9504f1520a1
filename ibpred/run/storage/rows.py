"""The reduction table in the store, one entry an integral, so that a few are read without the rest."""

from __future__ import annotations

import json
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass

import ibpred
from ibpred.digest import JsonData, canonical_bytes, digest
from ibpred.errors import StoreError
from ibpred.exact.codec import from_data, to_data
from ibpred.exact.grammar import parse_rational
from ibpred.exact.rational import Ring
from ibpred.family.definition import FamilyDefinition
from ibpred.identities.quantities import Integral
from ibpred.reconstruct.functions import Evidence
from ibpred.reduction.recording import Effort
from ibpred.reduction.several import CommonTable
from ibpred.reduction.wanted import Combination
from ibpred.run.storage.store import Store

Terms = tuple[tuple[int, str], ...]
"""(index of a master, coefficient as text), masters ascending; empty for an integral that vanishes."""


@dataclass(frozen=True)
class Batch:
    """How some rows were obtained: evidence and effort of the reconstructions."""

    evidence: tuple[Evidence, ...]
    effort: tuple[Effort, ...]


@dataclass(frozen=True)
class TableRows:
    """Reductions of some families' integrals to given masters, as far as they are known.

    Attributes
    ----------
    store
        Where they are.
    collection
        Digest of the families and the masters: a row depends on nothing else.
    masters
        The masters.
    ring
        Of the coefficients.
    """

    store: Store
    collection: str
    masters: tuple[Integral, ...]
    ring: Ring

    def missing(self, wanted: Sequence[Integral]) -> tuple[Integral, ...]:
        """Those of the wanted integrals that are not known."""
        return tuple(integral for integral in wanted if not self.store.has(self._key(integral)))

    def terms(self, integral: Integral) -> Terms:
        """The reduction of an integral, coefficients factored.

        Raises
        ------
        StoreError
            If there is none, or it is damaged.
        """
        _, found = self._row(integral)
        return tuple((index, text) for index, text in found)

    def combination(self, integral: Integral) -> Combination:
        """The same with exact coefficients."""
        return tuple((index, parse_rational(text, self.ring)) for index, text in self.terms(integral))

    def batches(self, wanted: Iterable[Integral]) -> tuple[Batch, ...]:
        """How the rows of some integrals were obtained."""
        keys = dict.fromkeys(self._row(integral)[0] for integral in wanted)
        return tuple(from_data(Batch, self.store.get(key)) for key in keys)

    def put(self, table: CommonTable) -> None:
        """Store the rows of a table to the same masters, all of them together."""
        if table.masters != self.masters:
            raise ValueError("the table has other masters")
        batch = digest([self.collection, "batch", to_data(tuple(table.reductions))])
        with self.store.transaction():
            self.store.put(batch, "evidence", to_data(Batch(table.evidence, table.effort)))
            for integral, combination in table.reductions.items():
                terms: JsonData = [[index, value.factored_text()] for index, value in combination]
                self.store.put_bytes(self._key(integral), "reduction", canonical_bytes([batch, terms]))

    def _key(self, integral: Integral) -> str:
        number, powers = integral
        return digest([self.collection, number, list(powers)])

    def _row(self, integral: Integral) -> tuple[str, list[tuple[int, str]]]:
        body = self.store.get_bytes(self._key(integral))
        if body is None:
            raise StoreError(f"{self.store.path} holds no reduction of {integral[1]}; reduce it first")
        batch, terms = json.loads(body)
        return batch, terms


def table_rows(store: Store, families: Sequence[FamilyDefinition], masters: Sequence[Integral]) -> TableRows:
    """The rows for families (crossed ones included) and their masters."""
    content = [[to_data(family) for family in families], to_data(tuple(masters))]
    collection = digest(["reductions", ibpred.__version__, *content])
    return TableRows(store, collection, tuple(masters), families[0].full_ring)


def reductions_of(rows: TableRows, wanted: Iterable[Integral]) -> Mapping[Integral, Combination]:
    """Exact reductions of some integrals."""
    return {integral: rows.combination(integral) for integral in wanted}
