"""The weather of an invented shore: tide, air, rain, and the water that the tidal intake brings.

Everything is a function of time and seed, so that any moment can be asked for by itself and history and present
join without a seam.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import ArrayLike

    from analysis.arrays import FloatArray
    from ingest.simulator.scenario import Rain

US_PER_HOUR: Final = 3_600_000_000
HOURS_PER_YEAR: Final = 8765.82

CONSTITUENTS: Final = {
    "M2": (28.9841042, 1.02),
    "S2": (30.0000000, 0.36),
    "N2": (28.4397295, 0.21),
    "K1": (15.0410686, 0.07),
    "O1": (13.9430356, 0.06),
    "M4": (57.9682084, 0.05),
}
"""Speed [degrees/h] and height [m] of the tide's constituents. Speeds: Schureman, Manual of Harmonic Analysis and
Prediction of Tides, 1940, table 2 (from memory); the heights are this invented shore's own."""

SEA_SALINITY: Final = 35.6
SPRING_TIDE_M: Final = 1.7
"""Height of high water above the mean at which the intake sees nothing of the river."""
RIVER_LAG_H: Final = 9.0
"""A rain reaches the intake in full this long after it has fallen."""
RIVER_PER_MM: Final = 0.012
"""Part of river water at the intake for each millimetre of rain at the height of the flood."""
FAIR_WEATHER_RIVER: Final = 0.035


def smooth_noise(hours: ArrayLike, *, seed: tuple[int, ...], shortest_h: float, longest_h: float) -> FloatArray:
    """Return a slow wander of standard deviation 1 about 0: five sines of seeded period and phase."""
    rng = np.random.default_rng(seed)
    periods_h = np.exp(rng.uniform(np.log(shortest_h), np.log(longest_h), 5))
    phases = rng.uniform(0.0, 2.0 * np.pi, 5)
    angles = 2.0 * np.pi * np.asarray(hours, dtype=np.float64)[..., None] / periods_h + phases
    return np.asarray(np.sqrt(2.0 / 5.0) * np.sin(angles).sum(axis=-1))


@dataclass(frozen=True)
class Weather:
    """Tide, air and rain at one place.

    Parameters
    ----------
    seed : int
    anchor_us : int
        Zero of the hours below: microseconds since 1970, UTC.
    longitude : float
        Sets the hour of the sun. [degrees east]
    rains : tuple of Rain
        The scenario's rains.
    """

    seed: int
    anchor_us: int
    longitude: float = 0.0
    rains: tuple[Rain, ...] = ()

    def absolute_h(self, hours: ArrayLike) -> FloatArray:
        """Return hours since 1970 from hours since the anchor. [h]"""
        return np.asarray(np.asarray(hours, dtype=np.float64) + self.anchor_us / US_PER_HOUR)

    def tide_m(self, hours: ArrayLike) -> FloatArray:
        """Return the height of the tide above mean sea level. [m]"""
        absolute_h = self.absolute_h(hours)
        rng = np.random.default_rng((self.seed, 1))
        height = np.zeros_like(absolute_h)
        for speed, amplitude in CONSTITUENTS.values():
            height += amplitude * np.cos(np.deg2rad(np.mod(speed * absolute_h, 360.0)) - rng.uniform(0.0, 2.0 * np.pi))
        return height

    def sun(self, hours: ArrayLike) -> FloatArray:
        """Return -1 at solar midnight to 1 at noon."""
        return np.asarray(-np.cos(2.0 * np.pi * (self.absolute_h(hours) / 24.0 + self.longitude / 360.0)))

    def season(self, hours: ArrayLike) -> FloatArray:
        """Return -1 in the last days of January to 1 in the last of July."""
        return np.asarray(-np.cos(2.0 * np.pi * (self.absolute_h(hours) - 25 * 24) / HOURS_PER_YEAR))

    def air_degC(self, hours: ArrayLike) -> FloatArray:
        """Return the temperature of the air outdoors: season, day, and the days' own moods. [degC]"""
        mood = smooth_noise(hours, seed=(self.seed, 2), shortest_h=30.0, longest_h=200.0)
        return np.asarray(16.5 + 5.5 * self.season(hours) + 4.0 * self.sun(np.asarray(hours) - 2.5) + 1.6 * mood)

    def rain_mm_h(self, hours: ArrayLike) -> FloatArray:
        """Return the rain. [mm/h]"""
        hours = np.asarray(hours, dtype=np.float64)
        fallen = [rain.is_on(hours) * (rain.depth_mm / rain.lasts_h) for rain in self.rains]
        return np.asarray(sum(fallen, start=np.zeros_like(hours)))

    def river_part(self, hours: ArrayLike) -> FloatArray:
        """Return the part of river water at the intake at mean tide: it swells after rain and falls slowly. [0 to 1]"""
        hours = np.asarray(hours, dtype=np.float64)
        part = np.full_like(hours, FAIR_WEATHER_RIVER)
        for rain in self.rains:
            lagged = np.maximum(rain.hours_since_start(hours), 0.0) / RIVER_LAG_H
            part += RIVER_PER_MM * rain.depth_mm * lagged * np.exp(1.0 - lagged)
        return np.asarray(np.minimum(part, 0.9))

    def intake_salinity(self, hours: ArrayLike) -> FloatArray:
        """Return practical salinity at the intake: least at low water after rain."""
        sees_river = np.clip(0.5 - 0.5 * self.tide_m(hours) / SPRING_TIDE_M, 0.02, 1.0)
        wander = 0.12 * smooth_noise(hours, seed=(self.seed, 3), shortest_h=8.0, longest_h=90.0)
        return np.asarray(np.maximum(SEA_SALINITY * (1.0 - 2.0 * self.river_part(hours) * sees_river) + wander, 0.3))

    def intake_temperature_degC(self, hours: ArrayLike) -> FloatArray:
        """Return the temperature of the intake's water. [degC]"""
        day = 0.5 * self.sun(np.asarray(hours) - 3.5)
        wander = 0.35 * smooth_noise(hours, seed=(self.seed, 4), shortest_h=20.0, longest_h=200.0)
        return np.asarray(17.0 + 2.8 * self.season(np.asarray(hours) - 480.0) + day + wander)
