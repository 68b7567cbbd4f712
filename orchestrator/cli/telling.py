"""Telling people things beside a command's result: on standard error, wrapped at words."""

from rich.console import Console


def tell(text: str) -> None:
    """Print to standard error; in a terminal lines break between words, in a file not at all."""
    console = Console(stderr=True)
    console.print(text, markup=False, highlight=False, soft_wrap=not console.is_terminal)
