"""Claims and findings as canonical data for JSON, and back: rationals as ``p/q``, no floating point anywhere.

Only strict input is read: a missing or unknown key, a float, a fraction not in lowest terms or
exponents out of order are refused, so that one claim has one text.
"""

from __future__ import annotations

import json
import re
import types
import typing
from collections.abc import Mapping
from dataclasses import fields, is_dataclass
from fractions import Fraction
from typing import Any, Final

from dossier.model.ball import Ball
from dossier.model.claim import KINDS, Claim, kind_of
from dossier.model.region import Box, Interval

PAIR = 2
FRACTION: Final = re.compile(r"-?[0-9]+(/[0-9]+)?")
"""Digits only: an exponent could stand for a number too large to hold."""


class MalformedClaimError(ValueError):
    """A certificate file that is not the canonical text of a claim."""


def canonical(data: Any) -> str:
    """Canonical JSON text: sorted keys, two-space indentation, one final newline."""
    return json.dumps(data, sort_keys=True, ensure_ascii=False, indent=1, allow_nan=False) + "\n"


def encode(value: Any) -> Any:
    """`value` (a frozen dataclass of this package, or a part of one) as plain data."""
    if value is None or isinstance(value, str | bool | int):
        return value
    if isinstance(value, Fraction):
        return str(value)
    if isinstance(value, float):
        raise TypeError("a float is no evidence")
    if isinstance(value, Ball):
        return str(value.middle) if value.is_exact else [str(value.middle), str(value.radius)]
    if isinstance(value, Interval):
        return [encode(value.lower), encode(value.upper)]
    if isinstance(value, Box):
        return {"names": list(value.names), "sides": [encode(i) for i in value.intervals]}
    if is_dataclass(value) and not isinstance(value, type):
        return {f.name: encode(getattr(value, f.name)) for f in fields(value)}
    if isinstance(value, Mapping):
        if all(isinstance(k, str) for k in value):
            return {k: encode(v) for k, v in value.items()}
        return [[list(k), encode(v)] for k, v in sorted(value.items())]
    if isinstance(value, tuple | list):
        return [encode(v) for v in value]
    raise TypeError(f"cannot write {type(value).__name__}")


def claim_to_data(claim: Claim) -> dict[str, Any]:
    """The data of a certificate file's claim, with its ``kind``."""
    return {"kind": kind_of(claim), **encode(claim)}


def claim_from_data(data: Any) -> Claim:
    """Inverse of `claim_to_data`.  Raises MalformedClaimErrorError, naming the place, for anything else."""
    if not isinstance(data, dict) or data.get("kind") not in KINDS:
        raise MalformedClaimError("kind: expected one of " + ", ".join(KINDS))
    kind = KINDS[data["kind"]]
    claim = _decode(kind, {k: v for k, v in data.items() if k != "kind"}, "claim")
    if claim_to_data(claim) != data:
        raise MalformedClaimError("claim: not in canonical form")
    return claim


def _decode(expected: Any, data: Any, place: str) -> Any:
    origin = typing.get_origin(expected)
    if origin in (typing.Union, types.UnionType):
        return None if data is None else _decode(typing.get_args(expected)[0], data, place)
    if origin is typing.Literal:
        return _one_of(typing.get_args(expected), data, place)
    if origin is tuple:
        return _decode_tuple(typing.get_args(expected), data, place)
    if origin in (Mapping, dict):
        return _decode_mapping(typing.get_args(expected), data, place)
    if expected is Fraction:
        return _decode_fraction(data, place)
    if expected is Ball:
        return _decode_ball(data, place)
    if expected is Interval:
        return _decode_interval(data, place)
    if expected is Box:
        return _decode_box(data, place)
    if is_dataclass(expected):
        return _decode_record(typing.cast(type, expected), data, place)
    if expected in (int, bool, str) and type(data) is expected:
        return data
    raise MalformedClaimError(f"{place}: expected {getattr(expected, '__name__', expected)}")


def _one_of(options: tuple[Any, ...], data: Any, place: str) -> Any:
    if data not in options:
        raise MalformedClaimError(f"{place}: expected one of {', '.join(map(str, options))}")
    return data


def _decode_tuple(parts: tuple[Any, ...], data: Any, place: str) -> tuple[Any, ...]:
    if not isinstance(data, list):
        raise MalformedClaimError(f"{place}: expected a list")
    return tuple(_decode(parts[0], d, f"{place}[{i}]") for i, d in enumerate(data))


def _decode_mapping(parts: tuple[Any, ...], data: Any, place: str) -> dict[Any, Any]:
    key, value = parts
    if key is str:
        if not isinstance(data, dict):
            raise MalformedClaimError(f"{place}: expected an object")
        return {k: _decode(value, v, f"{place}.{k}") for k, v in data.items()}
    if not isinstance(data, list) or not all(isinstance(d, list) and len(d) == PAIR for d in data):
        raise MalformedClaimError(f"{place}: expected a list of pairs")
    pairs = [(_decode(key, k, place), _decode(value, v, place)) for k, v in data]
    if [k for k, _ in pairs] != sorted({k for k, _ in pairs}):
        raise MalformedClaimError(f"{place}: monomials repeated or out of order")
    return dict(pairs)


def _decode_fraction(data: Any, place: str) -> Fraction:
    if not isinstance(data, str) or not FRACTION.fullmatch(data):
        raise MalformedClaimError(f"{place}: expected a fraction as text")
    try:
        value = Fraction(data)
    except (ValueError, ZeroDivisionError) as error:
        raise MalformedClaimError(f"{place}: expected a fraction, got {data!r}") from error
    if str(value) != data:
        raise MalformedClaimError(f"{place}: {data!r} is not in lowest terms")
    return value


def _decode_ball(data: Any, place: str) -> Ball:
    if isinstance(data, str):
        return Ball(_decode_fraction(data, place))
    if isinstance(data, list) and len(data) == PAIR:
        radius = _decode_fraction(data[1], place)
        if radius >= 0:
            return Ball(_decode_fraction(data[0], place), radius)
    raise MalformedClaimError(f"{place}: expected a ball")


def _decode_interval(data: Any, place: str) -> Interval:
    if not isinstance(data, list) or len(data) != PAIR:
        raise MalformedClaimError(f"{place}: expected two bounds")
    lower, upper = (None if d is None else _decode_fraction(d, place) for d in data)
    if lower is not None and upper is not None and lower > upper:
        raise MalformedClaimError(f"{place}: empty interval")
    return Interval(lower, upper)


def _decode_box(data: Any, place: str) -> Box:
    if not isinstance(data, dict) or set(data) != {"names", "sides"} or len(data["names"]) != len(data["sides"]):
        raise MalformedClaimError(f"{place}: expected a box")
    names = tuple(_decode(str, n, f"{place}.names") for n in data["names"])
    return Box(names, tuple(_decode_interval(s, f"{place}.{n}") for n, s in zip(names, data["sides"], strict=True)))


def _decode_record(kind: type, data: Any, place: str) -> Any:
    hints = typing.get_type_hints(kind)
    if not isinstance(data, dict) or set(data) != set(hints):
        raise MalformedClaimError(f"{place}: expected exactly the fields {', '.join(hints)}")
    return kind(**{name: _decode(hint, data[name], f"{place}.{name}") for name, hint in hints.items()})
