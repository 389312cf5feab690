"""A mapping that keeps what was used last: a day of gain changes must not fill the machine."""

from __future__ import annotations

from collections.abc import Callable
from typing import Generic, TypeVar

Key = TypeVar("Key")
Value = TypeVar("Value")


class Memory(Generic[Key, Value]):
    """Values by key, at most ``most`` of them; the one not used for longest goes first."""

    def __init__(self, most: int) -> None:
        self._most = most
        self._kept: dict[Key, Value] = {}

    def __contains__(self, key: Key) -> bool:
        return key in self._kept

    def __getitem__(self, key: Key) -> Value:
        value = self._kept.pop(key)
        self._kept[key] = value
        return value

    def __setitem__(self, key: Key, value: Value) -> None:
        self._kept.pop(key, None)
        self._kept[key] = value
        while len(self._kept) > self._most:
            del self._kept[next(iter(self._kept))]

    def remember(self, key: Key, find: Callable[[], Value]) -> Value:
        """The value kept, or the one that ``find`` makes."""
        if key not in self._kept:
            self[key] = find()
        return self[key]
