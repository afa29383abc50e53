"""Walking a pydantic model beside the data: which keys are known at a place, and what of a faulty file was right."""

import types
from collections.abc import Mapping
from functools import lru_cache
from typing import Annotated, Any, Union, get_args, get_origin

from pydantic import BaseModel, TypeAdapter, ValidationError
from pydantic.fields import FieldInfo


class Absent(Exception):
    """A value of a faulty file was missing or wrong and has been told; what needs it cannot be checked."""


class Partial:
    """Stands in for a model: right values by name, ``Absent`` for the others."""

    def __init__(self, values: Mapping[str, Any]) -> None:
        self._values = dict(values)

    def __getattr__(self, name: str) -> Any:
        try:
            return self.__dict__["_values"][name]
        except KeyError:
            raise Absent(name) from None


def partial_of(model: type[BaseModel], data: Any) -> Partial:
    """Each field read by itself: right ones kept, blocks descended into, the rest left out."""
    if not isinstance(data, dict):
        return Partial({})
    values: dict[str, Any] = {}
    for name, info in model.model_fields.items():
        key = info.alias or name
        if key not in data:
            if not info.is_required():
                values[name] = info.get_default(call_default_factory=True)
            continue
        try:
            values[name] = _adapter(model, name).validate_python(data[key], strict=True)
        except ValidationError:
            rest = _rest_of(info.annotation, data[key])
            if rest is not None:
                values[name] = rest
    return Partial(values)


@lru_cache(maxsize=1024)
def _adapter(model: type[BaseModel], name: str) -> TypeAdapter[Any]:
    info: FieldInfo = model.model_fields[name]
    kind: Any = Annotated[(info.annotation, *info.metadata)] if info.metadata else info.annotation
    return TypeAdapter(kind)


def _rest_of(annotation: Any, data: Any) -> Any:
    """What was right of a faulty block or list of blocks; None for anything else."""
    inner = _only_model(_candidates(annotation))
    if inner is not None:
        return partial_of(inner, data)
    lists = [c for c in _candidates(annotation) if get_origin(c) is tuple]
    item = _only_model(_candidates(get_args(lists[0])[0])) if lists else None
    if item is None or not isinstance(data, tuple):
        return None
    return tuple(partial_of(item, entry) for entry in data)


def _only_model(candidates: list[Any]) -> type[BaseModel] | None:
    models = [c for c in candidates if isinstance(c, type) and issubclass(c, BaseModel)]
    return models[0] if len(models) == 1 else None


def _candidates(annotation: Any) -> list[Any]:
    """What an annotation may be, unions opened and Annotated taken off."""
    if get_origin(annotation) is Annotated:
        return _candidates(get_args(annotation)[0])
    if get_origin(annotation) in (Union, types.UnionType):
        return [c for arg in get_args(annotation) for c in _candidates(arg)]
    return [annotation]


def known_keys(model: type[BaseModel], place: tuple[str | int, ...]) -> tuple[str, ...]:
    """The keys that are known in the block at ``place``; a union's tag in the place picks nothing and is passed."""
    here: list[Any] = [model]
    for part in place:
        below = [c for annotation in here for c in _below(annotation, part)]
        here = below or here
    keys = {info.alias or name for c in here if isinstance(c, type) and issubclass(c, BaseModel)
            for name, info in c.model_fields.items()}
    return tuple(sorted(keys))


def _below(annotation: Any, part: str | int) -> list[Any]:
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        for name, info in annotation.model_fields.items():
            if part in (info.alias or name, name):
                return _candidates(info.annotation)
        return []
    arguments = get_args(annotation)
    if get_origin(annotation) in (tuple, list) and isinstance(part, int):
        return [c for arg in arguments if arg is not Ellipsis for c in _candidates(arg)]
    if get_origin(annotation) is dict:
        return _candidates(arguments[1])
    return []
