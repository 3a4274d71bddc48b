"""A mapping that does not change, with a hash, and that can be sent to another process."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any, Generic, TypeVar

from pydantic import GetCoreSchemaHandler
from pydantic_core import CoreSchema, core_schema

__all__ = ["Frozen", "FrozenMapping"]

K = TypeVar("K")
V = TypeVar("V")


class FrozenMapping(Mapping[K, V], Generic[K, V]):
    """An immutable, hashable copy of a mapping that keeps its order.

    Parameters
    ----------
    items : mapping
        What it holds; the values must be hashable for the mapping to be so.

    Examples
    --------
    >>> FrozenMapping({"lifetime": 1e-6})["lifetime"]
    1e-06
    """

    __slots__ = ("_items",)

    def __init__(self, items: Mapping[K, V]) -> None:
        self._items = dict(items)

    def __getitem__(self, key: K) -> V:
        return self._items[key]

    def __iter__(self) -> Iterator[K]:
        return iter(self._items)

    def __len__(self) -> int:
        return len(self._items)

    def __hash__(self) -> int:
        return hash(frozenset(self._items.items()))

    def __repr__(self) -> str:
        return f"FrozenMapping({self._items!r})"

    def __reduce__(self) -> tuple[type[FrozenMapping[K, V]], tuple[dict[K, V]]]:
        return type(self), (dict(self._items),)


class Frozen:
    """Annotation that makes pydantic keep a mapping as a `FrozenMapping`."""

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        return core_schema.no_info_after_validator_function(FrozenMapping, handler(source))
