"""From a document to a typed model; the first thing that is wrong is told with its place."""

from typing import Any, TypeVar

from pydantic import ValidationError

from orchestrator.config.document import ConfigError, Document, Key
from orchestrator.config.quantity import Strict

Model = TypeVar("Model", bound=Strict)

_WORDS = {
    "missing": "is missing, and has no default",
    "extra_forbidden": "is not a key of this table",
}


def build(model: type[Model], document: Document) -> Model:
    """Build ``model`` from a document.

    Raises
    ------
    ConfigError
        With the file, line, key, value and allowed range of the first unknown key in the file,
        else of the first error.
    """
    try:
        return model.model_validate(document.data)
    except ValidationError as error:
        # A key that is misspelt is unknown and missing at once: the first tells more.
        items = error.errors()
        unknown = [item for item in items if item["type"] == "extra_forbidden"]
        found = [_config_error(document, item) for item in unknown or items]
        raise min(found, key=lambda one: one.line or 0) from None


def _config_error(document: Document, item: Any) -> ConfigError:
    key = _without_tags(tuple(item["loc"]), document.data)
    context = item.get("ctx") or {}
    problem = _WORDS.get(item["type"], item["msg"])
    given = None if item["type"] == "missing" else _shown(item["input"])
    allowed = context.get("allowed") or context.get("expected")
    return document.refuse(key, problem, value=given, allowed=allowed)


def _without_tags(key: Key, data: Any) -> Key:
    """Leave out the names of the union's members, which pydantic adds and no file contains."""
    kept: Key = ()
    for index, part in enumerate(key):
        inside = (isinstance(data, dict) and part in data) or isinstance(data, list)
        if inside:
            data = data[part]
        if inside or index == len(key) - 1:
            kept += (part,)
    return kept


def _shown(given: object) -> str:
    if isinstance(given, str):
        return f'"{given}"'
    if isinstance(given, dict | list):
        return "a table" if isinstance(given, dict) else "a list"
    return str(given).lower() if isinstance(given, bool) else str(given)
