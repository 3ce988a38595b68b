"""The contract in machine-readable form: JSON Schemas of what sites send and what the study demands.

A schema says what can be said of one field at a time; rules that tie fields together (ended_at after started_at, a protocol's names)
stand in the models alone.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from checks import ALL as CHECKS
from checks.check import Limits
from flows.study.manifest import MANIFEST_NAME, Manifest
from flows.study.protocol import PROTOCOL_NAME, Protocol

_DIALECT = "https://json-schema.org/draft/2020-12/schema"


def json_schemas() -> dict[str, dict[str, Any]]:
    """Return the JSON Schema of each file by its name: acquisition.json, and protocol.toml as the data TOML stands for."""
    protocol = Protocol.model_json_schema()
    protocol["properties"]["limits"] = _limits()
    return {MANIFEST_NAME: _dialect(Manifest.model_json_schema()), PROTOCOL_NAME: _dialect(protocol)}


def _dialect(schema: Mapping[str, Any]) -> dict[str, Any]:
    return {"$schema": _DIALECT, **schema}


def _limits() -> dict[str, Any]:
    """Return the schema of [limits]: every check that has limits, with the fields it declares."""
    tables = {
        check.name: {
            "type": "object",
            "description": check.title,
            "properties": {name: {"type": "number"} for name in _declared(check.limits, check.limits_rv)},
            "additionalProperties": False,
        }
        for check in CHECKS
    }
    return {"type": "object", "properties": dict(sorted(tables.items())), "additionalProperties": False}


def _declared(*limits: Limits | None) -> list[str]:
    return sorted({name for one in limits if one is not None for name in one.declared()})
