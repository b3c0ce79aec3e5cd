"""The vocabulary's frozen values as JSON text and back; what was written is read back equal."""

from __future__ import annotations

import dataclasses
import functools
import json
import math
import types
import typing
from collections.abc import Mapping
from typing import Any, TypeVar

T = TypeVar("T")


def to_json(value: Any) -> str:
    """Keys in the order of the fields; NaN and infinity become the text that float() reads, since JSON has none."""
    return json.dumps(_plain(value), ensure_ascii=False, allow_nan=False)


def from_json(text: str, model: type[T]) -> T:
    """ValueError or TypeError where the text is not that model."""
    return typing.cast("T", _rebuilt(json.loads(text), model))


def _plain(value: Any) -> Any:
    if dataclasses.is_dataclass(value) and not isinstance(value, type):
        return {field.name: _plain(getattr(value, field.name)) for field in dataclasses.fields(value)}
    if isinstance(value, tuple | list):
        return [_plain(item) for item in value]
    if isinstance(value, Mapping):
        return {str(key): _plain(item) for key, item in value.items()}
    value = value.item() if hasattr(value, "item") else value
    return str(value) if isinstance(value, float) and not math.isfinite(value) else value


@functools.cache
def _hints(model: type) -> dict[str, Any]:
    return typing.get_type_hints(model)


def _rebuilt(value: Any, model: Any) -> Any:
    if dataclasses.is_dataclass(model) and isinstance(model, type):
        hints = _hints(model)
        known = {field.name for field in dataclasses.fields(model)}
        return model(**{name: _rebuilt(item, hints[name]) for name, item in value.items() if name in known})
    origin, arguments = typing.get_origin(model), typing.get_args(model)
    if origin is tuple:
        if len(arguments) == 2 and arguments[1] is Ellipsis:
            return tuple(_rebuilt(item, arguments[0]) for item in value)
        return tuple(_rebuilt(item, kind) for item, kind in zip(value, arguments, strict=True))
    if origin is Mapping:
        return {key: _rebuilt(item, arguments[1]) for key, item in value.items()}
    if origin in (typing.Union, types.UnionType):
        kinds = [kind for kind in arguments if kind is not type(None)]
        return _rebuilt(value, kinds[0]) if value is not None and len(kinds) == 1 else value
    return float(value) if model is float else value
