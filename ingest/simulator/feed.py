"""What the sensors of a simulated hatchery send, in the order of time: as history in one go, or live."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Final

import numpy as np

from ingest.simulator.hatchery import Hatchery
from ingest.simulator.payloads import encoder_for
from ingest.simulator.scenario import Scenario
from ingest.simulator.sensors import SimulatedSensor
from ingest.simulator.weather import US_PER_HOUR

if TYPE_CHECKING:
    from collections.abc import Iterator

    from analysis.arrays import IntArray
    from ingest.simulator.sensors import Sent
    from ingest.site.models import Site

US_PER_SECOND: Final = 1_000_000
HISTORY_SLICE_US: Final = 86_400 * US_PER_SECOND
CUT_SHORT: Final = 0.6
"""Part of an unreadable payload that arrives."""


@dataclass
class Feed:
    """The messages of all sensors of a site.

    Parameters
    ----------
    site : Site
        Tanks and sensors.
    start_us : int
        From when on messages may be asked for. [us since 1970, UTC]
    seed : int
        Same site, scenario, anchor, start and seed: same messages.
    scenario : Scenario
        What happens; a quiet hatchery by default.
    anchor_us : int, optional
        Zero of the scenario's hours; default *start_us*.
    """

    site: Site
    start_us: int
    seed: int = 1
    scenario: Scenario = field(default_factory=Scenario)
    anchor_us: int | None = None

    def __post_init__(self) -> None:
        anchor_us = self.start_us if self.anchor_us is None else self.anchor_us
        self._hatchery = Hatchery(
            self.site, scenario=self.scenario, seed=self.seed, anchor_us=anchor_us, start_us=self.start_us
        )
        self._sensors = [
            SimulatedSensor(sensor, number=number, hatchery=self._hatchery, seed=self.seed)
            for number, sensor in enumerate(self.site.sensors)
        ]
        self._encoders = [encoder_for(sensor, has_channels=True) for sensor in self.site.sensors]

    def between(self, start_us: int, end_us: int, *, step_s: float | None = None) -> Iterator[tuple[int, str, bytes]]:
        """Yield time sent, topic and payload of every message from *start_us* to before *end_us*.

        Parameters
        ----------
        start_us, end_us : int
            [us since 1970, UTC]
        step_s : float, optional
            Time between the readings of a sensor; default: the sensor's own interval. [s]
        """
        sent = [
            simulated.sent(
                _moments(number, len(self._sensors), start_us, end_us, step_s or simulated.sensor.interval_s)
            )
            for number, simulated in enumerate(self._sensors)
        ]
        times = np.concatenate([rows.sent_at_us for rows in sent])
        owners = np.repeat(np.arange(len(sent)), [rows.sent_at_us.size for rows in sent])
        in_order = owners[np.argsort(times, kind="stable")]
        streams = [self._messages(number, rows) for number, rows in enumerate(sent)]
        for owner in in_order.tolist():
            yield from next(streams[owner])

    def forget_before(self, time_us: int) -> None:
        """Drop what is known of the time before *time_us*, but for what a running fault still looks back to."""
        longest_h = max((event.lasts_h for event in self.scenario.sensor_events), default=0.0)
        self._hatchery.forget_before(time_us - round(longest_h * US_PER_HOUR))

    def _messages(self, number: int, rows: Sent) -> Iterator[list[tuple[int, str, bytes]]]:
        """Yield the messages of each reading of one sensor."""
        encoded = self._encoders[number](rows.readings)
        columns = zip(rows.sent_at_us.tolist(), encoded, rows.is_readable.tolist(), strict=True)
        for sent_at_us, messages, is_readable in columns:
            yield [
                (sent_at_us, topic, payload if is_readable else payload[: int(len(payload) * CUT_SHORT)])
                for topic, payload in messages
            ]


def simulate(
    site: Site,
    *,
    start_us: int,
    end_us: int,
    step_s: float | None,
    seed: int,
    scenario: Scenario | None = None,
    anchor_us: int | None = None,
) -> Iterator[tuple[int, str, bytes]]:
    """Yield time sent, topic and payload of every message of a simulated history, in the order of time.

    Parameters
    ----------
    site : Site
        Tanks and sensors.
    start_us, end_us : int
        The history: from the one to before the other. [us since 1970, UTC]
    step_s : float or None
        Time between the readings of a sensor; None for the sensor's own interval. [s]
    seed : int
        The same arguments give the same messages.
    scenario : Scenario, optional
        What happens; a quiet hatchery by default.
    anchor_us : int, optional
        Zero of the scenario's hours; default *end_us*: the scenario starts where the history ends.
    """
    feed = Feed(site, start_us, seed, scenario or Scenario(), end_us if anchor_us is None else anchor_us)
    for slice_us in range(start_us, end_us, HISTORY_SLICE_US):
        yield from feed.between(slice_us, min(slice_us + HISTORY_SLICE_US, end_us), step_s=step_s)


def _moments(number: int, count: int, start_us: int, end_us: int, step_s: float) -> IntArray:
    """Return when the sensor of this number reads: whole steps since 1970, each sensor a little after the one before."""
    step_us = round(step_s * US_PER_SECOND)
    phase_us = step_us * number // count // 1000 * 1000
    first = -((phase_us - start_us) // step_us)
    last = -((phase_us - end_us) // step_us)
    return np.arange(first, last, dtype=np.int64) * step_us + phase_us
