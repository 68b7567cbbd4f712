"""What is held of the sample now: the prior before the night, findings as they come."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

from orchestrator.config.sequence import Prior

_SAME = 0.02  # a relative change that is not worth a new plan
_WINDOW_SD = 2.5  # within so many standard deviations a finding belongs to an orbit of the prior


@dataclass(frozen=True, slots=True)
class OrbitBelief:
    """One orbit, with the standard deviation of its frequency in T."""

    frequency_t: float
    frequency_sd_t: float
    mass: float
    dingle_k: float


@dataclass(frozen=True)
class Belief:
    """The orbits that are thought to be there; immutable."""

    orbits: tuple[OrbitBelief, ...]

    @classmethod
    def from_prior(cls, prior: Prior) -> "Belief":
        """What the sequence file says; its spread is one standard deviation."""
        return cls(
            tuple(
                OrbitBelief(one.frequency_t, prior.spread * one.frequency_t, one.mass, one.dingle_k)
                for one in prior.orbits
            )
        )

    @property
    def frequency_most_t(self) -> float:
        """The highest frequency that must be resolved: the highest there is, and one sd more."""
        return max(one.frequency_t + one.frequency_sd_t for one in self.orbits)

    def with_findings(self, found: Sequence[Mapping[str, Any]]) -> "Belief":
        """What is held after findings.

        A found orbit takes the place of the orbit it belongs to; what was not found is kept. One
        that belongs to none is added if it needs no denser samples than what is held already: a
        frequency that nobody asked for must not make the night longer. Mass and Dingle
        temperature that were not determined stay as they were held.
        """
        orbits = list(self.orbits)
        free = set(range(len(orbits)))
        for one in found:
            frequency, sd = _number(one.get("frequency_t")), _number(one.get("frequency_sd_t"))
            if frequency is None or frequency <= 0:
                continue
            near = [
                index
                for index in free
                if abs(orbits[index].frequency_t - frequency)
                <= _WINDOW_SD * max(orbits[index].frequency_sd_t, 0.02 * frequency)
            ]
            if near:
                index = min(near, key=lambda at: abs(orbits[at].frequency_t - frequency))
                free.discard(index)
                held = orbits[index]
            elif frequency > self.frequency_most_t:
                continue
            else:
                held = OrbitBelief(frequency, 0.0, self.orbits[0].mass, self.orbits[0].dingle_k)
                orbits.append(held)
                index = len(orbits) - 1
            orbits[index] = replace(
                held,
                frequency_t=frequency,
                frequency_sd_t=sd if sd is not None and sd > 0 else held.frequency_sd_t,
                mass=_number(one.get("mass")) or held.mass,
                dingle_k=_number(one.get("dingle_k")) or held.dingle_k,
            )
        return Belief(tuple(orbits))

    def same_as(self, other: "Belief") -> bool:
        """Whether a plan made with the other would hardly differ."""
        if len(self.orbits) != len(other.orbits):
            return False
        change = abs(self.frequency_most_t - other.frequency_most_t)
        return change <= _SAME * other.frequency_most_t


def _number(value: Any) -> float | None:
    usable = isinstance(value, int | float) and not isinstance(value, bool) and value > 0
    return float(value) if usable else None
