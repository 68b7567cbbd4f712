"""The lines that a screen is made of: a row with its name, a title, a bar."""

import math

from rich.text import Text

Lines = list[Text]

BAR = 10  # characters
_NAME = 13  # columns of a row's name


def row(name: str, *parts: str | tuple[str, str]) -> Text:
    """A line that begins with a name, then parts, each plain or with a style."""
    return Text.assemble((f" {name:<{_NAME}}", "dim"), *parts)


def row_with_end(width: int, name: str, end: str, *parts: str | tuple[str, str]) -> Lines:
    """A row whose end, begun by a comma or semicolon, goes to a line below where it is too long."""
    whole = row(name, *parts, end)
    if len(whole) <= width or not end:
        return [whole]
    return [row(name, *parts), row("", end.lstrip(",; "))]


def title(text: str) -> Text:
    """The heading of a section."""
    return Text(f" {text}", style="bold")


def bar(part: float) -> str:
    """A bar for a part of one."""
    filled = round(BAR * min(1.0, max(0.0, part))) if math.isfinite(part) else 0
    return "█" * filled + "░" * (BAR - filled)
