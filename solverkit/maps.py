"""The maps T(n) = n/2 for even n and (q·n + d)/2 for odd n."""

from __future__ import annotations

from dataclasses import dataclass

from solverkit.errors import InputError

__all__ = ["AffineForm", "Map"]


@dataclass(frozen=True, slots=True)
class AffineForm:
    """The map n ↦ (slope·n + shift) / 2^steps that T^steps is on one residue class mod 2^steps.

    Args:
        slope: q to the number of odd steps.
        shift: d·β, with β as in Böhm & Sontacchi (1978).
        steps: number of steps.
    """

    slope: int
    shift: int
    steps: int

    def __call__(self, n: int) -> int:
        """Return the image of ``n``; raise ValueError when ``n`` has another parity word."""
        value, remainder = divmod(self.slope * n + self.shift, 1 << self.steps)
        if remainder:
            raise ValueError(f"{n} does not follow the parity word of this form")
        return value


@dataclass(frozen=True, slots=True, order=True)
class Map:
    """One map (q, d).

    Args:
        multiplier: q, odd and at least 3.
        offset: d, odd (hence not 0), of either sign.

    Raises:
        InputError: a value outside these ranges.

    >>> Map(3, 1).step(7), Map(3, 1).step(22)
    (11, 11)
    """

    multiplier: int
    offset: int

    def __post_init__(self) -> None:
        if self.multiplier < 3 or self.multiplier % 2 == 0:
            raise InputError("multiplier", self.multiplier, "an odd integer of at least 3")
        if self.offset % 2 == 0:
            raise InputError("offset", self.offset, "an odd integer, positive or negative")

    def __str__(self) -> str:
        return f"{self.multiplier}x{self.offset:+d}".replace("-", "\N{MINUS SIGN}")

    def step(self, n: int) -> int:
        """Return T(n)."""
        return (self.multiplier * n + self.offset) >> 1 if n & 1 else n >> 1

    def orbit(self, n: int, steps: int) -> list[int]:
        """Return n, T(n), …, T^steps(n): ``steps + 1`` integers."""
        values = [n]
        for _ in range(steps):
            values.append(self.step(values[-1]))
        return values

    def parity_word(self, n: int, steps: int) -> str:
        """Return the parities of n, T(n), …, T^(steps−1)(n) as a text of 0 and 1."""
        return "".join("1" if value & 1 else "0" for value in self.orbit(n, steps - 1)) if steps else ""

    def affine(self, word: str) -> AffineForm:
        """Return T^len(word) on the integers whose first parities are ``word``.

        Source: Terras, Acta Arith. 30 (1976) 241-252; Böhm & Sontacchi (1978).
        """
        slope, beta = 1, 0
        for position, parity in enumerate(word):
            if parity == "1":
                slope, beta = self.multiplier * slope, self.multiplier * beta + (1 << position)
        return AffineForm(slope, self.offset * beta, len(word))

    def reflected(self) -> Map:
        """Return (q, −d): n ↦ −n carries the one map to the other."""
        return Map(self.multiplier, -self.offset)
