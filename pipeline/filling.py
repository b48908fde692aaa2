"""Placeholders: `{option}` filled from the graph's options, `{file}` and the like from an asset. No expressions."""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping
from typing import Any

from tangentry.pipeline.errors import nearest

ASSET_FIELDS = ("file", "stem", "folder", "below")
PLACEHOLDER = re.compile(r"\{([A-Za-z_]\w*)\}")


def fill(value: Any, known: Mapping[str, Any], later: Iterable[str], wrong: Any) -> Any:
    """A value with its placeholders filled from `known`; those in `later` stay.

    What is one placeholder and nothing else takes its value's type.

    >>> fill(["{a}", "x-{a}", "{stem}"], {"a": 1.5}, ["stem"], print)
    [1.5, 'x-1.5', '{stem}']
    """
    if isinstance(value, list):
        return [fill(item, known, later, wrong) for item in value]
    if isinstance(value, dict):
        return {key: fill(item, known, later, wrong) for key, item in value.items()}
    if not isinstance(value, str) or "{" not in value:
        return value
    whole = PLACEHOLDER.fullmatch(value)
    if whole and whole[1] in known:
        return known[whole[1]]

    def one(found: re.Match[str]) -> str:
        name = found[1]
        if name in known:
            return text_of(known[name])
        if name not in later:
            possible = [*known, *(field for field in ASSET_FIELDS if field not in known)]
            wrong(f'"{{{name}}}" has nothing to fill it; there are {", ".join(possible)}.{nearest(name, possible)}')
        return found[0]

    return PLACEHOLDER.sub(one, value)


def text_of(value: Any) -> str:
    """A value as a part of a text."""
    if value is None or isinstance(value, bool):
        return {None: "", True: "true", False: "false"}[value]
    return str(value)
