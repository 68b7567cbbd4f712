"""Telling people things: on standard error beside a command's result, and in any encoding."""

import codecs
import io
import sys

from rich.console import Console

_RAISED = dict(zip("⁰¹²³⁴⁵⁶⁷⁸⁹⁻", "0123456789-", strict=True))
_SPELT_OUT = {
    "±": "+-",
    "×": "x",
    "·": "-",
    "…": "...",
    "µ": "u",
    "₂": "_2",
    "─": "-",
    "━": "-",
    "ₑ": "_e",
}


def tell(text: str) -> None:
    """Print to standard error; in a terminal lines break between words, in a file not at all."""
    console = Console(stderr=True)
    console.print(text, markup=False, highlight=False, soft_wrap=not console.is_terminal)


def spell_out_where_needed() -> None:
    """Let signs that an output's encoding lacks be spelt out, so that no message is lost to it."""
    codecs.register_error("spelt-out", _spell_out)
    for stream in (sys.stdout, sys.stderr):
        if isinstance(stream, io.TextIOWrapper):
            stream.reconfigure(errors="spelt-out")


def _spell_out(error: UnicodeError) -> tuple[str, int]:
    if not isinstance(error, UnicodeEncodeError):
        raise error
    text, was_raised = "", False
    for sign in error.object[error.start : error.end]:
        if sign in _RAISED:
            text += _RAISED[sign] if was_raised else f"^{_RAISED[sign]}"
        else:
            text += _SPELT_OUT.get(sign, "?")
        was_raised = sign in _RAISED
    return text, error.end
