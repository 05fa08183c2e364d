"""JSON text of the core to frozen dataclasses and back.

The dataclasses state the form; nothing is listed twice. Numbers that are not finite stand as ``null`` in
JSON, as the core writes them, and come back as NaN.
"""

from __future__ import annotations

import dataclasses
import json
import math
import types
import typing
from collections.abc import Mapping
from functools import cache
from typing import Any, TypeVar

from hushrail.errors import RangeError, ReadError

__all__ = ["from_text", "to_request", "to_text"]

T = TypeVar("T")


def from_text(kind: type[T], text: str, name: str) -> T:
    """Make a dataclass from JSON text.

    Parameters
    ----------
    kind : type
        The dataclass.
    text : str
        JSON text; keys the dataclass does not know are left out, since a form may grow within its version.
    name : str
        Stands for the text in messages, such as a file name.

    Raises
    ------
    ReadError
        Text that is not JSON (with line and column), or a key that is missing or of the wrong kind.
    """
    try:
        plain = json.loads(text)
    except json.JSONDecodeError as e:
        found = (
            f"{name}:{e.lineno}:{e.colno}: not JSON: {e.msg}; want the text that hushrail writes with --json"
        )
        raise ReadError(found, name, e.lineno, e.colno) from None
    made: T = _make(kind, plain, name, "")
    return made


def to_text(value: object, indent: int | None = None) -> str:
    """Write a dataclass as JSON text."""
    return json.dumps(_plain(value), indent=indent, ensure_ascii=False, allow_nan=False)


def to_request(spec: object) -> str:
    """Write what is asked of the core as JSON text.

    Raises
    ------
    RangeError
        A number that is not finite.
    """
    try:
        return json.dumps(spec, allow_nan=False)
    except ValueError:
        raise RangeError("a number of the request is not finite; want finite numbers") from None


@cache
def _form(kind: type) -> dict[str, Any]:
    hints = typing.get_type_hints(kind)
    return {field.name: hints[field.name] for field in dataclasses.fields(kind)}


@cache
def _optional(kind: type) -> frozenset[str]:
    """Fields that an older text may lack."""
    fields = dataclasses.fields(kind)
    return frozenset(field.name for field in fields if field.default is not dataclasses.MISSING)


def _make(kind: Any, plain: Any, name: str, where: str) -> Any:  # noqa: ANN401
    def wrong(wanted: str) -> ReadError:
        text = f"{name}: `{where or 'the whole'}` is {_shown(plain)}; want {wanted}"
        return ReadError(text, name)

    if dataclasses.is_dataclass(kind) and isinstance(kind, type):
        if not isinstance(plain, dict):
            raise wrong("an object")
        form = _form(kind)
        missing = [key for key in form if key not in plain and key not in _optional(kind)]
        if missing:
            raise wrong(f"an object with the key `{missing[0]}`")
        parts = {
            key: _make(each, plain[key], name, f"{where}.{key}".lstrip("."))
            for key, each in form.items()
            if key in plain
        }
        return kind(**parts)
    origin, args = typing.get_origin(kind), typing.get_args(kind)
    if origin is tuple:
        if not isinstance(plain, list):
            raise wrong("a list")
        return tuple(_make(args[0], each, name, f"{where}[{i}]") for i, each in enumerate(plain))
    if origin is Mapping:
        if not isinstance(plain, dict):
            raise wrong("an object")
        return {key: _make(args[1], each, name, f"{where}.{key}") for key, each in plain.items()}
    if origin in (typing.Union, types.UnionType):
        # what may be absent is absent, and not a number that is none
        if plain is None and type(None) in args:
            return None
        for each in args:
            try:
                return _make(each, plain, name, where)
            except ReadError:
                continue
        raise wrong(" or ".join(_named(each) for each in args))
    if isinstance(kind, type) and issubclass(kind, tuple):
        size = len(kind.__annotations__)
        if not isinstance(plain, list) or len(plain) != size:
            raise wrong(f"a list of {size} numbers")
        return kind(*(_make(float, each, name, f"{where}[{i}]") for i, each in enumerate(plain)))
    if kind is float:
        if plain is None:
            return math.nan
        if isinstance(plain, bool) or not isinstance(plain, int | float):
            raise wrong("a number")
        return float(plain)
    if not isinstance(plain, kind) or (kind is int and isinstance(plain, bool)):
        raise wrong(_named(kind))
    return plain


def _named(kind: Any) -> str:  # noqa: ANN401
    words = {str: "text", int: "a whole number", float: "a number", bool: "true or false"}
    return words.get(kind, "an object")


def _shown(plain: object) -> str:
    text = json.dumps(plain, ensure_ascii=False)
    return text if len(text) <= 40 else text[:37] + "..."


def _plain(value: Any) -> Any:  # noqa: ANN401
    if dataclasses.is_dataclass(value):
        return {field.name: _plain(getattr(value, field.name)) for field in dataclasses.fields(value)}
    if isinstance(value, tuple | list):
        return [_plain(each) for each in value]
    if isinstance(value, Mapping):
        return {key: _plain(each) for key, each in value.items()}
    if isinstance(value, float) and not math.isfinite(value):
        return None
    return value
