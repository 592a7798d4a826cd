"""A model as a file: given the same file, a replay is the same bit for bit on every machine."""

from __future__ import annotations

import json
import math
from dataclasses import asdict, fields
from pathlib import Path
from typing import Any

import numpy as np

from auditor.arrays import read_only
from auditor.controllers.pid import Pid
from auditor.errors import LoopFileError, Problem
from auditor.identify.plant import Load, Model, Plant

FORMAT, VERSION = "auditor/model", 1

_ARRAYS = ("A", "B0", "B1", "C")
_TUPLES = ("time_constants_s", "parameters", "reasons")


def model_text(model: Model) -> str:
    """Write a model as JSON text; numbers keep every bit, infinite ones are null."""
    body = {f.name: _plain(getattr(model, f.name)) for f in fields(Model)}
    body["plants"] = [{f.name: _plain(getattr(plant, f.name)) for f in fields(Plant)} for plant in model.plants]
    for plant, row in zip(model.plants, body["plants"], strict=True):
        row["load"] = asdict(plant.load)
    body["controller"] = {f.name: _plain(getattr(model.controller, f.name)) for f in fields(Pid)}
    return json.dumps({"format": FORMAT, "version": VERSION, **body}, indent=1, allow_nan=False) + "\n"


def read_model(path: Path) -> Model:
    """Read a model that `model_text` wrote.

    Raises
    ------
    LoopFileError
        The file is missing, no JSON, or not a model of this version.
    """
    try:
        body = json.loads(path.read_text(encoding="utf-8"))
    except (OSError, UnicodeDecodeError, json.JSONDecodeError) as error:
        raise _unusable(path, str(error)) from error
    if not isinstance(body, dict) or (body.pop("format", None), body.pop("version", None)) != (FORMAT, VERSION):
        raise _unusable(path, "another format")
    try:
        return _model(body)
    except (KeyError, TypeError, ValueError) as error:
        raise _unusable(path, f"{type(error).__name__}: {error}") from error


def _model(body: dict[str, Any]) -> Model:
    plants = tuple(_plant(row) for row in body.pop("plants"))
    controller = Pid(**{k: _number(k, v) for k, v in body.pop("controller").items()})
    rest: dict[str, Any] = {k: tuple(v) if k in _TUPLES else v for k, v in body.items()}
    return Model(plants=plants, controller=controller, **rest)


def _plant(row: dict[str, Any]) -> Plant:
    load = Load(**row.pop("load"))
    arrays: dict[str, Any] = {name: read_only(np.array(row.pop(name), dtype=float)) for name in _ARRAYS}
    rest: dict[str, Any] = {k: tuple(v) if k in _TUPLES else v for k, v in row.items()}
    return Plant(load=load, **arrays, **rest)


def _plain(value: Any) -> Any:
    if isinstance(value, np.ndarray):
        return value.tolist()
    if isinstance(value, np.generic):
        return _plain(value.item())
    if isinstance(value, float) and not math.isfinite(value):
        return None
    return list(value) if isinstance(value, tuple) else value


def _number(name: str, value: Any) -> Any:
    """An infinite setting of the controller was written as null."""
    if value is not None:
        return value
    return -math.inf if name == "low" else math.inf


def _unusable(path: Path, found: str) -> LoopFileError:
    return LoopFileError(
        Problem(
            what="the model file cannot be used",
            where=str(path),
            found=found,
            expected=f"a file written by `auditor identify LOOPFILE --save FILE` ({FORMAT}, version {VERSION})",
            do="identify the loop again with this version",
        )
    )
