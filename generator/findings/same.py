"""A key that knows a value again by identity: for caches of what is derived from numbers that don't change.

Comparing or hashing thousands of fractions would cost as much as deriving anew.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Generic, TypeVar

T = TypeVar("T")


@dataclass(frozen=True, slots=True, eq=False)
class Same(Generic[T]):
    """The value itself (kept, so that its place in storage stays its own), equal to nothing but itself."""

    value: T

    def __eq__(self, other: object) -> bool:
        return isinstance(other, Same) and other.value is self.value

    def __hash__(self) -> int:
        return id(self.value)
