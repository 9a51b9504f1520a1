"""Families of the benchmarks, and the steps that are timed apart."""

from __future__ import annotations

import resource
from dataclasses import dataclass
from functools import cache
from pathlib import Path

from ibpred.exact.primes import first_primes
from ibpred.family.definition import FamilyDefinition
from ibpred.family.reading import read_family
from ibpred.identities.derivatives import derivative_templates
from ibpred.identities.quantities import Quantity, template_at
from ibpred.identities.rows import FamilyIdentities, family_identities
from ibpred.reduction.choice import choose_masters
from ibpred.sectors.analysis import SectorAnalysis, analyse

PRIMES = first_primes(60)
FOLDER = Path(__file__).parents[2] / "families"


@dataclass(frozen=True)
class Subject:
    """A family with its sectors."""

    family: FamilyDefinition
    analysis: SectorAnalysis
    identities: FamilyIdentities

    @property
    def top(self) -> int:
        return max(self.analysis.nonzero, key=int.bit_count)


def family_text(name: str) -> str:
    """A shipped family file, or the double box with the same mass in all lines."""
    if name != "planar-double-box-all-massive":
        return (FOLDER / f"{name}.toml").read_text(encoding="utf-8")
    text = (FOLDER / "planar-double-box.toml").read_text(encoding="utf-8")
    lines = []
    for line in text.splitlines():
        lines.append(line.replace("t = 2 }", "t = 2, m2 = 2 }"))
        if line.startswith("momentum = "):
            lines.append('mass2 = "m2"')
    return "\n".join(lines)


@cache
def subject(name: str) -> Subject:
    family = read_family(family_text(name), f"{name}.toml", name)
    analysis = analyse(family)
    [identities] = family_identities([family], [analysis])
    return Subject(family, analysis, identities)


@cache
def masters(name: str) -> tuple[tuple[int, ...], ...]:
    it = subject(name)
    return choose_masters(it.family, it.analysis, PRIMES, 7).masters


def derivatives(name: str) -> list[Quantity]:
    """The derivatives of the masters in all invariants."""
    family = subject(name).family
    templates = derivative_templates(family)
    return [template_at(templates[v.name], m) for v in family.invariants for m in masters(name)]


def peak_megabytes() -> int:
    """Largest resident memory of this process so far."""
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss // 1024
