"""The JSON Schema of graph files, made from the signatures of the node kinds at hand, for editors and other checkers.

It tells what can be told without following references: keys, kinds, inputs, settings and their types.
"""

from __future__ import annotations

from typing import Any

from tangentry.pipeline.drafts import FORMAT, MOST_NODES
from tangentry.pipeline.kinds import REQUIRED, Kind, Kinds, Setting
from tangentry.pipeline.yaml import LONGEST

DIALECT = "https://json-schema.org/draft/2020-12/schema"
FILLED_IN = {"type": "string", "pattern": r"\{[A-Za-z_]\w*\}"}
REFERENCE = {"type": ["string", "null"], "pattern": r"^[A-Za-z_][\w-]*(\.[A-Za-z_]\w*)?$"}
NAME = r"^[A-Za-z_][\w-]*$"


def graph_schema(kinds: Kinds) -> dict[str, Any]:
    """The schema, as plain data."""
    found = [kinds.get(name) for name in kinds.names]
    section = {
        "type": ["object", "null"],
        "maxProperties": MOST_NODES,
        "propertyNames": {"pattern": NAME},
        "additionalProperties": {"$ref": "#/$defs/node"},
    }
    names = {"anyOf": [{"type": "array", "items": {"type": "string"}}, {"type": "object"}]}
    return {
        "$schema": DIALECT,
        "title": "Tangentry graph file",
        "type": "object",
        "required": ["tangentry"],
        "anyOf": [{"required": ["per_asset"]}, {"required": ["whole_library"]}],
        "additionalProperties": False,
        "properties": {
            "tangentry": {"const": FORMAT, "description": "version of this format"},
            "about": {"type": ["string", "null"], "maxLength": LONGEST, "description": "what the graph is for"},
            "library": {
                "description": "every file that matches is one asset",
                "anyOf": [
                    {"type": "string"},
                    {"type": "array", "items": {"type": "string"}, "minItems": 1},
                    {"type": "null"},
                ],
            },
            "kinds": {"type": ["string", "null"], "description": "folder of the project's own node kinds"},
            "options": {
                "type": ["object", "null"],
                "description": "values that settings may name in braces, and --set changes",
                "propertyNames": {"pattern": r"^[A-Za-z_]\w*$"},
            },
            "inputs": {"description": "of a graph used as a node: the values it takes", **names},
            "outputs": {"description": "of a graph used as a node: the values it gives", **names},
            "per_asset": {"description": "nodes that run once for each file of the library", **section},
            "whole_library": {"description": "nodes that run once, over the values of all assets", **section},
        },
        "$defs": {"node": _node(found)},
    }


def _node(kinds: list[Kind]) -> dict[str, Any]:
    names = [{"const": kind.name, "description": kind.line} for kind in kinds]
    return {
        "type": "object",
        "required": ["node"],
        "properties": {
            "node": {"anyOf": [*names, {"type": "string", "pattern": r"\.ya?ml$", "description": "another graph file"}]}
        },
        "allOf": [
            {"if": {"properties": {"node": {"const": kind.name}}, "required": ["node"]}, "then": _kind(kind)}
            for kind in kinds
        ],
    }


def _kind(kind: Kind) -> dict[str, Any]:
    inputs = {
        one.name: {**REFERENCE, "description": f"{'all assets: ' if one.many else ''}{one.flow.__name__}"}
        for one in kind.inputs.values()
    }
    settings = {setting.name: _setting(setting) for setting in kind.settings.values()}
    needed = [one.name for one in kind.inputs.values() if not one.optional]
    needed += [setting.name for setting in kind.settings.values() if setting.default is REQUIRED]
    return {
        "additionalProperties": False,
        "required": ["node", *needed],
        "properties": {"node": True, **inputs, **settings},
    }


def _setting(setting: Setting) -> dict[str, Any]:
    schema = setting.schema()
    about = schema.pop("description", None)
    outer = {"anyOf": [schema, FILLED_IN]} if not setting.file else schema
    return {**outer, "description": about} if about else outer
