"""What a benchmark gives: figures of this run with their units, and ratios between them."""

from dataclasses import dataclass, field


@dataclass
class Outcome:
    """Figures and ratios by name; a figure's name ends in its unit."""

    figures: dict[str, float] = field(default_factory=dict)
    ratios: dict[str, float] = field(default_factory=dict)

    def lines(self) -> list[str]:
        """For people."""
        return [
            *(f"  {name:<58} {value:>12.4g}" for name, value in self.figures.items()),
            *(f"  {name:<58} {value:>11.2f} x" for name, value in self.ratios.items()),
        ]
