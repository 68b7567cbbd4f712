"""What a model knows of its file: the keys of each table, and what a key is for."""

from typing import Any, Literal, get_args, get_origin

from pydantic.fields import FieldInfo

from orchestrator.config.document import Key
from orchestrator.config.quantity import Strict

Place = Key  # as pydantic gives it: the names of a union's members stand in it


def keys_of_table(model: type[Strict], place: Place) -> list[str]:
    """The keys that a table may have, in the order of the model; empty if it is no table."""
    keys = [key for one in _models_at(model, place) for key in _fields(one)]
    return list(dict.fromkeys(keys))


def what_it_is_for(model: type[Strict], place: Place) -> str:
    """The description of a key; empty if it has none."""
    for one in _models_at(model, place[:-1]):
        if field := _fields(one).get(str(place[-1])):
            return field.description or ""
    return ""


def _fields(model: type[Strict]) -> dict[str, FieldInfo]:
    return {field.alias or name: field for name, field in model.model_fields.items()}


def _models_at(model: type[Strict], place: Place) -> list[type[Strict]]:
    models = [model]
    for part in place:
        if isinstance(part, int):
            continue
        inner = [
            found
            for one in models
            if part in _fields(one)
            for found in _models_in(_fields(one)[part].annotation)
        ]
        models = inner or [one for one in models if _tag(one) == part]
    return models


def _models_in(annotation: Any) -> list[type[Strict]]:
    """The models that an annotation is made of: of a list, a union, or of itself."""
    if isinstance(annotation, type) and issubclass(annotation, Strict):
        return [annotation]
    return [found for part in get_args(annotation) for found in _models_in(part)]


def _tag(model: type[Strict]) -> str:
    kind = model.model_fields.get("kind")
    if kind is None or get_origin(kind.annotation) is not Literal:
        return ""
    return str(get_args(kind.annotation)[0])
