"""What commands take from their options: numbers, grids, files to be written; found wanting before the work starts."""

from __future__ import annotations

import math
import os
import tempfile
import tomllib
from collections.abc import Iterable
from pathlib import Path
from typing import Any

import click

MOST_CELLS = 1_000_000


def writable(option: str, path: Path) -> None:
    """See that a file of this name can be made, before hours are spent on what it is to hold.

    raises : click.BadParameter
    """
    folder = path.absolute().parent
    if path.is_dir():
        raise click.BadParameter(f"{path} is a folder, not a file", param_hint=option)
    if not folder.is_dir():
        raise click.BadParameter(f"there is no folder {folder}", param_hint=option)
    if path.exists() and not path.is_file():
        raise click.BadParameter(f"{path} is there and no ordinary file", param_hint=option)
    try:
        handle, name = tempfile.mkstemp(prefix=".try-", dir=folder)  # asks more than the permission bits: quota, mounts
        os.close(handle)
        os.unlink(name)
    except OSError as error:
        raise click.BadParameter(f"cannot write in {folder}: {error.strerror or error}", param_hint=option) from None


def named_numbers(option: str, settings: Iterable[str]) -> dict[str, Any]:
    """Texts "name=value" as a dictionary; a value is a number, true, false, a text, or several with commas.

    raises : click.BadParameter
    """
    named: dict[str, Any] = {}
    for setting in settings:
        name, equals, text = (part.strip() for part in setting.partition("="))
        if not equals or not name or not text:
            raise click.BadParameter(f"{setting!r} must look like name=value", param_hint=option)
        if name in named:
            raise click.BadParameter(f"{name} is set twice", param_hint=option)
        named[name.replace("-", "_")] = _value(text)
    return named


def _value(text: str) -> Any:
    for attempt in (text, f"[{text}]" if "," in text else text):
        try:
            table = tomllib.loads(f"value = {attempt}")
        except (ValueError, RecursionError):
            continue
        if set(table) == {"value"}:
            return table["value"]
    return [word.strip() for word in text.split(",") if word.strip()] if "," in text else text


def grid(option: str, specifications: Iterable[str]) -> dict[str, list[float]]:
    """Texts "key=start:stop:step" (stop included when a step lands on it) or "key=v1,v2,..." as values by key.

    raises : click.BadParameter
    """
    over: dict[str, list[float]] = {}
    cells = 1
    for specification in specifications:
        key, equals, text = (part.strip() for part in specification.partition("="))
        if not equals or not key or not text:
            raise click.BadParameter(
                f"{specification!r} must look like key=start:stop:step or key=v1,v2,...", param_hint=option
            )
        if key in over:
            raise click.BadParameter(f"{key} is given twice", param_hint=option)
        over[key] = _steps(option, key, text) if ":" in text else [_number(option, key, v) for v in text.split(",")]
        repeated = next((v for i, v in enumerate(over[key]) if v in over[key][:i]), None)
        if repeated is not None:
            raise click.BadParameter(f"{key} has the value {repeated:g} twice", param_hint=option)
        cells *= len(over[key])
        if cells > MOST_CELLS:
            raise click.BadParameter(f"more than {MOST_CELLS} cells, which no machine finishes", param_hint=option)
    return over


def _steps(option: str, key: str, text: str) -> list[float]:
    parts = [_number(option, key, part) for part in text.split(":")]
    if len(parts) != 3:
        raise click.BadParameter(f"{key}={text} must be start:stop:step, three numbers", param_hint=option)
    start, stop, step = parts
    if step == 0.0 or (stop - start) / step < 0.0:
        raise click.BadParameter(
            f"{key}={text} never gets from {start:g} to {stop:g} by steps of {step:g}", param_hint=option
        )
    count = math.floor((stop - start) / step * (1.0 + 1e-12) + 1e-9) + 1
    if count > MOST_CELLS:
        raise click.BadParameter(f"{key}={text} has more than {MOST_CELLS} values", param_hint=option)
    values = [start + k * step for k in range(count)]
    return [round(value, 12) if abs(value) < 1e3 else value for value in values]  # 0.1 + 2 * 0.1 is meant to be 0.3


def _number(option: str, key: str, text: str) -> float:
    try:
        value = float(text)
    except ValueError:
        value = math.nan
    if not math.isfinite(value):
        raise click.BadParameter(f"{key}: {text.strip()!r} is not a number", param_hint=option)
    return value
