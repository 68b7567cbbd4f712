"""What pydantic found, in the words of this project."""

import re
from dataclasses import dataclass
from typing import Any

from orchestrator.config.document import Key

_PROBLEMS = {
    "missing": "is missing, and has no default",
    "extra_forbidden": "is not a key of this table",
    "int_type": "must be a whole number",
    "int_from_float": "must be a whole number",
    "string_type": "must be text",
    "bool_type": "must be true or false",
    "list_type": "must be a list",
    "model_type": "must be a table",
    "model_attributes_type": "must be a table",
    "string_too_short": "must not be empty",
    "greater_than_equal": "is outside what is allowed",
    "less_than_equal": "is outside what is allowed",
    "less_than": "is outside what is allowed",
    "literal_error": "is not one of the words that may stand here",
    "string_pattern_mismatch": "is not spelt as such a name may be",
    "union_tag_invalid": "is no kind that there is",
    "union_tag_not_found": "is missing, and has no default",
    "too_short": "has too few entries",
    "too_long": "has too many entries",
}


@dataclass(frozen=True, slots=True)
class Said:
    """A problem in words, what stands there, what may, and where below its place it is."""

    problem: str
    given: str | None
    allowed: str | None
    below: Key = ()


def say(item: Any) -> Said:
    """Put one of pydantic's errors in words."""
    kind, context = item["type"], item.get("ctx") or {}
    problem = _PROBLEMS.get(kind, item["msg"])
    given = None if kind == "missing" else shown(item["input"])
    allowed = context.get("allowed")
    if kind == "literal_error":
        allowed = str(context["expected"]).replace("'", '"')
    elif kind == "string_pattern_mismatch":
        allowed = _spelling(str(context["pattern"]))
    elif kind == "union_tag_invalid":
        words = str(context["expected_tags"]).replace("'", '"')
        return Said(problem, f'"{context["tag"]}"', words, ("kind",))
    elif kind == "union_tag_not_found":
        return Said(problem, None, None, ("kind",))
    elif kind == "greater_than_equal":
        allowed = f"{context['ge']} or more"
    elif kind == "less_than_equal":
        allowed = f"{context['le']} or less"
    elif kind == "less_than":
        allowed = f"less than {context['lt']}"
    elif kind == "too_short":
        allowed = f"{context['min_length']} or more"
    elif kind == "too_long":
        allowed = f"{context['max_length']} or fewer"
    return Said(problem, given, allowed)


def shown(given: object) -> str:
    """A value of a file, as an error shows it."""
    if isinstance(given, str):
        return f'"{given}"'
    if isinstance(given, dict):
        return "a table"
    if isinstance(given, list):
        return f"a list of {len(given)}"
    return str(given).lower() if isinstance(given, bool) else str(given)


def _spelling(pattern: str) -> str:
    """The words for a pattern of a name, such as ``^[a-z][a-z0-9-]{0,47}$``."""
    found = re.fullmatch(r"\^\[a-z(0-9)?\]\[a-z0-9([-_])\]\{0,(\d+)\}\$", pattern)
    if found is None:
        return pattern
    first = "a small letter or digit" if found[1] else "a small letter"
    return f"{first}, then small letters, digits and {found[2]}, {int(found[3]) + 1} at most"
