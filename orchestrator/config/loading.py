"""From a document to a typed model; what is wrong is told with its place, all of it at once."""

from typing import Any, TypeVar

from pydantic import ValidationError

from orchestrator.config.document import ConfigError, Document, Key
from orchestrator.config.keys import keys_of_table, what_it_is_for
from orchestrator.config.quantity import Strict
from orchestrator.config.saying import say

Model = TypeVar("Model", bound=Strict)

_KINDS = ("rig", "sequence", "world")  # each kind of file has a table that is called like it


def build(model: type[Model], document: Document) -> Model:
    """Build ``model`` from a document.

    Raises
    ------
    ConfigError
        With the file, line, key, value and allowed range of the first error in the file, and the
        others below it. Where keys are unknown, missing ones are not told: a key that is misspelt
        is both, and the first tells more.
    """
    _refuse_another_kind(model, document)
    try:
        return model.model_validate(document.data)
    except ValidationError as error:
        items = error.errors()
        if any(item["type"] == "extra_forbidden" for item in items):
            items = [item for item in items if item["type"] != "missing"]
        found = [_config_error(model, document, item) for item in items]
        # Unknown keys first, then by line.
        unknown = {id(one) for one, item in zip(found, items, strict=True) if _is_unknown(item)}
        found.sort(key=lambda one: (id(one) not in unknown, one.line or 0))
        found[0].others = tuple(found[1:])
        raise found[0] from None


def _is_unknown(item: Any) -> bool:
    return bool(item["type"] == "extra_forbidden")


def _refuse_another_kind(model: type[Strict], document: Document) -> None:
    """Tell a file that was given in the place of another one."""
    (wanted,) = (key for key in keys_of_table(model, ()) if key in _KINDS)
    if wanted in document.data:
        return
    for kind in _KINDS:
        if kind in document.data:
            problem = f"is a {kind} file (line {document.line_of((kind,))}: [{kind}])"
            raise ConfigError(document.path, f"{problem}; a {wanted} file is wanted here")


def _config_error(model: type[Strict], document: Document, item: Any) -> ConfigError:
    loc = tuple(item["loc"])
    key = _without_tags(loc, document.data)
    said = say(item)
    problem, allowed = said.problem, said.allowed
    if item["type"] == "missing" and (purpose := what_it_is_for(model, loc)):
        problem += f"; {purpose}"
    if item["type"] == "extra_forbidden":
        allowed = ", ".join(keys_of_table(model, loc[:-1])) or None
    return document.refuse((*key, *said.below), problem, value=said.given, allowed=allowed)


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
