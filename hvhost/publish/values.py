"""Frozen dataclasses <-> the plain values that a strict JSON encoder takes.

`plain` never yields a number that is not finite.  `typed` takes plain values back, skips fields that it does not know
and raises :class:`WireFault` at the field whose value is of the wrong kind.
"""

import math
import types
import typing
from dataclasses import fields, is_dataclass
from enum import StrEnum
from functools import cache
from typing import Any

from hvhost.words.errors import WireFault


@cache
def _hints(kind: type) -> dict[str, Any]:
    """Return field name -> resolved type of a dataclass."""
    return typing.get_type_hints(kind)


def plain(value: Any) -> Any:
    """Return a field's value as plain JSON values; not-finite numbers become None."""
    if isinstance(value, StrEnum):
        return str(value)
    if isinstance(value, float):
        return value if math.isfinite(value) else None
    if isinstance(value, tuple):
        return [plain(item) for item in value]
    if is_dataclass(value):
        return {field.name: plain(getattr(value, field.name)) for field in fields(value)}
    return value


def typed(value: Any, kind: Any, place: str) -> Any:
    """Return ``value`` as an instance of the annotation ``kind``, or raise WireFault naming ``place``.

    Kinds: bool, int, float, str, StrEnum, dataclass, NamedTuple of floats, ``tuple[kind, ...]`` and ``kind | None``.
    """
    origin = typing.get_origin(kind)
    if origin in (types.UnionType, typing.Union):
        inner = next(part for part in typing.get_args(kind) if part is not type(None))
        return None if value is None else typed(value, inner, place)
    if origin is tuple:
        item = typing.get_args(kind)[0]
        return tuple(typed(part, item, f"{place}[{n}]") for n, part in enumerate(_need(value, list, place)))
    if issubclass(kind, StrEnum):
        try:
            return kind(_need(value, str, place))
        except ValueError:
            raise WireFault(" | ".join(map(repr, map(str, kind))), repr(value)[:60], place) from None
    if is_dataclass(kind):
        return _typed_fields(_need(value, dict, place), kind, place)
    if issubclass(kind, tuple):  # a NamedTuple: short lists, since there are many
        numbers = [typed(part, float, place) for part in _need(value, list, place)]
        if len(numbers) != len(_hints(kind)):
            raise WireFault(f"{len(_hints(kind))} numbers", f"{len(numbers)}", place)
        return kind(*numbers)
    if kind is float:
        return float(_need(value, (int, float), place))
    return _need(value, kind, place)


def _typed_fields(data: dict[str, Any], kind: Any, place: str) -> Any:
    hints = _hints(kind)
    known = {name: typed(data[name], hints[name], f"{place}.{name}") for name in hints if name in data}
    try:
        return kind(**known)
    except TypeError:
        missing = sorted(name for name in hints if name not in data)
        raise WireFault("every field without a default", f"missing among {', '.join(missing)}"[:200], place) from None


def _need(value: Any, kind: Any, place: str) -> Any:
    if (isinstance(value, bool) and kind is not bool) or not isinstance(value, kind):
        wanted = "number" if isinstance(kind, tuple) else kind.__name__
        raise WireFault(wanted, repr(value)[:60], place)
    return value
