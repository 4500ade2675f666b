"""How far a change of salinity is, counted in what the animals may be asked to take.

A limit such as "a quarter of the present salinity an hour, and below 2 at most 0.25 an hour" is a rate that
depends on salinity. Its *effort* coordinate counts the hours that the limit itself needs from 0 to a
salinity; any change then costs the difference of two efforts, and "no more than the limit over any 60 minutes"
becomes "no more than 1 h of effort between any two moments up to 60 minutes apart", whatever the bands.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Final, Literal

import numpy as np

from analysis.errors import InvalidInputError

if TYPE_CHECKING:
    from numpy.typing import ArrayLike

    from analysis.arrays import FloatArray

LEAST_SALINITY: Final = 1e-3
"""A fraction of the present salinity has no end; below this it counts as none left."""

BandKind = Literal["fraction", "absolute"]


@dataclass(frozen=True, slots=True)
class Band:
    """One stretch of salinity and the change allowed in it per unit of time (or per step).

    Parameters
    ----------
    above : float
        The stretch reaches from here up to the next band.
    kind : {"fraction", "absolute"}
        A share of the distance to `reference`, or salinity units.
    allowed : float
        For "fraction" more than 0 and less than 1; for "absolute" more than 0.
    reference : float
        For "fraction": the level from which the distance counts, at most `above`; 0 for "of the present
        salinity".
    """

    above: float
    kind: BandKind
    allowed: float
    reference: float = 0.0

    def __post_init__(self) -> None:
        if self.kind == "fraction" and not 0.0 < self.allowed < 1.0:
            raise InvalidInputError("share of the present salinity", found=self.allowed, allowed="between 0 and 1")
        if self.kind == "absolute" and not self.allowed > 0.0:
            raise InvalidInputError("allowed change", found=self.allowed, allowed="more than 0")
        if self.kind == "fraction" and self.reference > self.above:
            raise InvalidInputError("reference of a band", found=self.reference, allowed=f"at most {self.above:g}")

    def effort_from_floor(self, level: FloatArray) -> FloatArray:
        """Return the effort from `above` to *level*, both inside this band."""
        if self.kind == "absolute":
            return np.asarray((level - self.above) / self.allowed)
        floor = max(self.above - self.reference, LEAST_SALINITY)
        distance = np.maximum(level - self.reference, floor)
        return np.asarray(np.log(distance / floor) / -np.log1p(-self.allowed))


@dataclass(frozen=True, slots=True)
class RateLaw:
    """Allowed change by band of salinity, for one direction.

    Parameters
    ----------
    bands : tuple of Band
        From the lowest up; the lowest begins at 0 or below, the highest has no end.
    """

    bands: tuple[Band, ...]

    def __post_init__(self) -> None:
        edges = [band.above for band in self.bands]
        if not edges or edges[0] > 0.0 or edges != sorted(set(edges)):
            raise InvalidInputError("bands of a rate", found=edges, allowed="rising edges that begin at 0")

    def effort(self, level: ArrayLike) -> FloatArray:
        """Return the effort coordinate of *level*: it rises with the level, 0 at the lowest edge.

        Parameters
        ----------
        level : array_like
            Salinity (or temperature, or pH). Below the lowest edge it counts as that edge.
        """
        values = np.asarray(level, dtype=np.float64)
        only = self.bands[0]
        if len(self.bands) == 1 and only.kind == "absolute":  # most laws are one fixed rate
            return np.asarray((np.maximum(values, only.above) - only.above) / only.allowed)
        total = np.zeros(values.shape)
        tops = [band.above for band in self.bands[1:]] + [np.inf]
        for band, top in zip(self.bands, tops, strict=True):
            total = total + band.effort_from_floor(np.clip(values, band.above, top))
        return total

    def allowed_at(self, level: float) -> float:
        """Return the change that the limit allows per unit of time at *level*, in the unit of the level."""
        band = [band for band in self.bands if band.above <= max(level, self.bands[0].above)][-1]
        return band.allowed if band.kind == "absolute" else band.allowed * max(level - band.reference, 0.0)


def constant_rate(allowed: float, *, lowest: float = 0.0) -> RateLaw:
    """Return the law of one fixed rate."""
    return RateLaw((Band(above=lowest, kind="absolute", allowed=allowed),))


def fraction_then_constant(fraction: float, *, down_to: float, then: float) -> RateLaw:
    """Return the law "a share of the present salinity down to a level, then a fixed rate"."""
    if down_to <= 0.0:
        return RateLaw((Band(above=0.0, kind="fraction", allowed=fraction),))
    return RateLaw(
        (Band(above=0.0, kind="absolute", allowed=then), Band(above=down_to, kind="fraction", allowed=fraction))
    )
