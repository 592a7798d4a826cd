"""JSON Schema of `audit.json`, for everybody who reads that file."""

from __future__ import annotations

import json
from importlib.resources import files
from typing import Any


def audit_schema() -> dict[str, Any]:
    """Return the JSON Schema (draft 2020-12) that every `audit.json` keeps."""
    text = (files(__name__) / "audit.json").read_text(encoding="utf-8")
    schema: dict[str, Any] = json.loads(text)
    return schema
