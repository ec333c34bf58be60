"""What a wider search found for a few of the rays."""

from __future__ import annotations

from dataclasses import dataclass

WORTH_TELLING_S = 0.005


@dataclass(frozen=True)
class BoundCheck:
    """Outcome of searching a hundredth of the rays again, inside a wider bound.

    The fine search of a ray leaves out what a bound rules out. The bound rests on
    the coarse graph's times, which are near those of rays but not below them; this
    tells how often it hid an earlier ray. The rays stay as they are.

    Attributes
    ----------
    checked : int
        Rays searched again.
    improved : int
        Those found earlier by more than 1 ms.
    largest_gain_s : float
        By how much the most improved of them is earlier, s.
    """

    checked: int = 0
    improved: int = 0
    largest_gain_s: float = 0.0

    def __str__(self) -> str:
        return (
            f"{self.checked} rays searched again inside a wider bound: {self.improved} earlier "
            f"by more than 1 ms, at most by {1e3 * self.largest_gain_s:.1f} ms"
        )

    @property
    def worth_telling(self) -> bool:
        """Whether a ray was earlier by more than 5 ms."""
        return self.largest_gain_s > WORTH_TELLING_S

    def joined(self, other: BoundCheck) -> BoundCheck:
        """Return the outcome of both checks together."""
        return BoundCheck(
            self.checked + other.checked,
            self.improved + other.improved,
            max(self.largest_gain_s, other.largest_gain_s),
        )
