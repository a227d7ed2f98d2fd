"""Closed intervals and boxes with rational end points, possibly unbounded."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from fractions import Fraction
from itertools import product


@dataclass(frozen=True, slots=True)
class Interval:
    """The closed interval [lower, upper]; None means unbounded on that side."""

    lower: Fraction | None
    upper: Fraction | None

    def __post_init__(self) -> None:
        if self.lower is not None and self.upper is not None and self.lower > self.upper:
            raise ValueError(f"empty interval [{self.lower}, {self.upper}]")

    @classmethod
    def point(cls, value: Fraction) -> Interval:
        """The interval that holds `value` only."""
        return cls(value, value)

    @property
    def is_bounded(self) -> bool:
        """Both ends are finite."""
        return self.lower is not None and self.upper is not None

    @property
    def is_point(self) -> bool:
        """It holds one value only."""
        return self.is_bounded and self.lower == self.upper

    @property
    def bounds(self) -> tuple[Fraction, Fraction]:
        """Both ends; raises ValueError where unbounded."""
        if self.lower is None or self.upper is None:
            raise ValueError("the interval is unbounded")
        return self.lower, self.upper

    @property
    def width(self) -> Fraction:
        """Upper minus lower end; raises ValueError where unbounded."""
        lower, upper = self.bounds
        return upper - lower

    @property
    def middle(self) -> Fraction:
        """Mean of the ends; raises ValueError where unbounded."""
        lower, upper = self.bounds
        return (lower + upper) / 2

    def contains(self, other: Interval, *, strictly: bool = False) -> bool:
        """`other` lies inside; with `strictly`, inside the interior (an unbounded side is always clear)."""
        below = self.lower is not None and (
            other.lower is None or other.lower < self.lower or (strictly and other.lower == self.lower)
        )
        above = self.upper is not None and (
            other.upper is None or other.upper > self.upper or (strictly and other.upper == self.upper)
        )
        return not (below or above)

    def shift(self, offset: Fraction) -> Interval:
        """The interval moved by `offset`."""
        return Interval(
            None if self.lower is None else self.lower + offset, None if self.upper is None else self.upper + offset
        )


UNBOUNDED = Interval(None, None)


@dataclass(frozen=True, slots=True)
class Box:
    """A product of intervals, one per name, in a fixed order."""

    names: tuple[str, ...]
    intervals: tuple[Interval, ...]

    def __post_init__(self) -> None:
        if len(self.names) != len(self.intervals):
            raise ValueError("one interval per name")

    @classmethod
    def from_mapping(cls, names: tuple[str, ...], sides: Mapping[str, Interval]) -> Box:
        """Box over `names`; a name without a side is unbounded."""
        return cls(names, tuple(sides.get(n, UNBOUNDED) for n in names))

    def __getitem__(self, name: str) -> Interval:
        return self.intervals[self.names.index(name)]

    def items(self) -> Iterator[tuple[str, Interval]]:
        """Pairs of name and side."""
        return zip(self.names, self.intervals, strict=True)

    @property
    def is_bounded(self) -> bool:
        """Every side is bounded."""
        return all(i.is_bounded for i in self.intervals)

    def corners(self) -> Iterator[tuple[Fraction, ...]]:
        """All corners of a bounded box; degenerate sides count once.  Raises ValueError where unbounded."""
        return product(*(tuple(dict.fromkeys(i.bounds)) for i in self.intervals))

    def contains(self, other: Box, *, strictly: bool = False) -> bool:
        """`other`, over the same names in the same order, lies inside (the interior)."""
        return self.names == other.names and all(
            a.contains(b, strictly=strictly) for a, b in zip(self.intervals, other.intervals, strict=True)
        )
