"""Records of plain values, to JSON and back."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import asdict, dataclass, fields, is_dataclass
from typing import Any, ClassVar, get_args, get_type_hints

import numpy as np

Number = float | None
Triple = tuple[Number, Number, Number]


@dataclass(frozen=True)
class Record:
    """Plain values only: arrays become tuples, numpy numbers Python's, and what is not finite becomes None."""

    #: Properties that are written beside the fields.
    derived: ClassVar[tuple[str, ...]] = ()

    def __post_init__(self) -> None:
        for one in fields(self):
            object.__setattr__(self, one.name, _tidy(getattr(self, one.name)))

    def as_dict(self) -> dict[str, Any]:
        """The record as JSON knows it: objects, lists, numbers, words, null."""
        names = [*(one.name for one in fields(self)), *self.derived]
        return {name: _plain(getattr(self, name)) for name in names}


def _tidy(value: Any) -> Any:
    if isinstance(value, np.ndarray | np.generic):
        value = value.tolist()
    if isinstance(value, float) and not math.isfinite(value):
        return None
    if isinstance(value, list | tuple):
        return tuple(_tidy(one) for one in value)
    return value


def _plain(value: Any) -> Any:
    if isinstance(value, Record):
        return value.as_dict()
    if is_dataclass(value) and not isinstance(value, type):
        return asdict(value)
    if isinstance(value, tuple):
        return [_plain(one) for one in value]
    return value


def built(cls: type, raw: Mapping[str, Any]) -> Any:
    """The record that `as_dict` wrote; entries of a later version are passed over."""
    hints = get_type_hints(cls)
    given = {one.name: _read(hints[one.name], raw[one.name]) for one in fields(cls) if one.name in raw}
    return cls(**given)


def _read(hint: Any, raw: Any) -> Any:
    if isinstance(raw, list):
        return tuple(_read(hint, one) for one in raw)
    inner = _record_in(hint)
    return built(inner, raw) if inner and raw is not None else raw


def _record_in(hint: Any) -> type | None:
    if is_dataclass(hint):
        return hint
    return next((found for one in get_args(hint) if (found := _record_in(one))), None)
