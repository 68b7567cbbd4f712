"""What a benchmark gives: figures of this run with their units, and ratios between them."""

from dataclasses import dataclass, field

from tests.bench.timing import Figure


@dataclass
class Outcome:
    """Figures and ratios by name; a figure's name ends in its unit."""

    figures: dict[str, Figure] = field(default_factory=dict)
    ratios: dict[str, Figure] = field(default_factory=dict)

    def lines(self) -> list[str]:
        """For people."""
        return [
            *(_line(name, one, "") for name, one in self.figures.items()),
            *(_line(name, one, " x") for name, one in self.ratios.items()),
        ]


def _line(name: str, figure: Figure, unit: str) -> str:
    spread = "" if figure.spread is None else f" ± {figure.spread:.3g}"
    return f"  {name:<58} {figure.value:>10.4g}{spread}{unit}"
