"""Flow values as bytes: a manifest (canonical JSON) and its arrays, every one named by the digest of its content.

    value  ->  manifest {"is": "Chart", "corners": {"array": "5f1c..."}, "area": 2.0}  ->  digest of the manifest

Reading goes by the type that is wanted, never by a name found in the manifest, so a shared store can't make us import
or run anything. An array's digest is remembered for as long as the array lives: one that a node passes on unchanged is
neither hashed nor written again.
"""

from __future__ import annotations

import dataclasses
import json
import math
import types
import typing
from collections.abc import Callable, Mapping
from functools import cache
from typing import Any

import numpy as np
from blake3 import blake3
from tangentry.pipeline.flow import Array

Plain = None | bool | int | float | str | list[Any] | dict[str, Any]


def canonical(data: Plain) -> str:
    """The one JSON text of plain data: keys sorted, no spaces."""
    return json.dumps(data, sort_keys=True, separators=(",", ":"))


def digest_text(text: str) -> str:
    """Digest of a text, 64 hexadecimal digits."""
    return blake3(text.encode()).hexdigest()


def to_manifest(value: object, keep: Callable[[Array], str]) -> str:
    """The manifest of a flow value; `keep` puts an array where it can be found and gives its digest."""
    return json.dumps(_encode(value, keep), separators=(",", ":"), allow_nan=False)


def _encode(value: object, keep: Callable[[Array], str]) -> Plain:
    if value is None or isinstance(value, (bool, int, str)):
        return value
    if isinstance(value, float):
        return float(value) if math.isfinite(value) else {"float": repr(float(value))}
    if isinstance(value, np.ndarray):
        return {"array": keep(value)}
    if isinstance(value, (tuple, list)):
        return [_encode(item, keep) for item in value]
    if isinstance(value, Mapping):
        return {"map": [[str(name), _encode(item, keep)] for name, item in value.items()]}
    if dataclasses.is_dataclass(value) and not isinstance(value, type):
        fields = {field.name: _encode(getattr(value, field.name), keep) for field in dataclasses.fields(value)}
        return {"is": type(value).__name__, **fields}
    raise TypeError(f"a {type(value).__name__} can't flow along an edge")


def from_manifest(manifest: str, wanted: type, fetch: Callable[[str], Array]) -> Any:
    """The flow value of type `wanted` that a manifest tells; `fetch` gives the array of a digest.

    Raises ValueError where the manifest does not tell such a value.
    """
    try:
        return _decode(json.loads(manifest), wanted, fetch)
    except (KeyError, TypeError, AttributeError, RecursionError) as error:
        raise ValueError(f"the manifest does not hold a {wanted.__name__}") from error


def arrays_of(manifest: str) -> list[str]:
    """Digests of the arrays that a manifest names."""
    found: list[str] = []

    def visit(data: dict[str, Any]) -> dict[str, Any]:
        if isinstance(data.get("array"), str) and len(data) == 1:
            found.append(data["array"])
        return data

    json.loads(manifest, object_hook=visit)
    return found


@cache
def _fields(wanted: type) -> dict[str, Any]:
    return typing.get_type_hints(wanted)


def _decode(data: Any, wanted: Any, fetch: Callable[[str], Array]) -> Any:
    origin, inner = typing.get_origin(wanted), typing.get_args(wanted)
    if origin in (types.UnionType, typing.Union):
        return None if data is None else _decode(data, _member(data, inner), fetch)
    if wanted is np.ndarray or origin is np.ndarray:
        return fetch(data["array"])
    if dataclasses.is_dataclass(wanted):
        if data["is"] != wanted.__name__:  # type: ignore[union-attr]
            raise TypeError(data["is"])
        hints = _fields(wanted)  # type: ignore[arg-type]
        return wanted(**{name: _decode(data[name], hints[name], fetch) for name in data if name != "is"})  # type: ignore[operator]
    if origin in (tuple, list):
        each = [inner[0]] * len(data) if origin is list or inner[-1] is Ellipsis else list(inner)
        return origin(_decode(item, kind, fetch) for item, kind in zip(data, each, strict=True))
    if origin in (dict, Mapping):
        return {name: _decode(item, inner[1], fetch) for name, item in data["map"]}
    if wanted is float and isinstance(data, dict):
        return float(data["float"])
    return data


def _member(data: Any, members: tuple[Any, ...]) -> Any:
    """The member of a union that data was written from."""
    real = [member for member in members if member is not type(None)]
    if len(real) == 1:
        return real[0]
    if isinstance(data, dict) and "is" in data:
        return next(member for member in real if getattr(member, "__name__", "") == data["is"])
    if isinstance(data, dict) and "array" in data:
        return np.ndarray
    if isinstance(data, dict) and "float" in data:
        return float
    return type(data)
