"""A pumping or injecting well."""

from dataclasses import dataclass


@dataclass(frozen=True)
class PumpingWell:
    """A well at x, y (m) with screen radius (m); rate (m3/d) > 0 takes water out, < 0 injects.

    Phi = rate / (2 pi) ln(r / R) (Thiem 1906). Inside the screen the potential is that of the screen.
    """

    name: str
    x: float
    y: float
    rate: float
    radius: float = 0.15

    def __post_init__(self) -> None:
        if not self.radius > 0:
            raise ValueError(f"radius of well {self.name!r} must be positive (m); instead received {self.radius}")
