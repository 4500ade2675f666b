"""Which readings are new: duplicates are counted, contradictions kept aside, late ones marked.

*Late* means older than the newest processed reading of the same sensor, never older than the wall clock: a backlog
that comes in order is not late. The answer depends on the order of arrival alone, not on how the stream was cut into blocks.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, TypeAlias

import numpy as np

from analysis.flags import Flag

if TYPE_CHECKING:
    from collections.abc import Callable

    from ingest.chain.block import RawBlock

AsSent: TypeAlias = tuple[float, float, float]
"""Conductivity, temperature and pressure as sent; NaN where absent."""


@dataclass(frozen=True, slots=True)
class Admission:
    """What became of a block at the door.

    Attributes
    ----------
    block : RawBlock
        The new readings in the order of arrival; late ones carry the flag `late`.
    duplicates : int
        Readings that are stored already with the same values.
    contradictions : tuple of int
        Indices into the block that came, of readings whose moment is taken by other values.
    """

    block: RawBlock
    duplicates: int
    contradictions: tuple[int, ...]


def admit(newest_us: list[int], raw: RawBlock, *, stored: Callable[[int, int], AsSent | None]) -> Admission:
    """Sort out a block.

    Parameters
    ----------
    newest_us : list of int
        For each sensor the newest measured time processed so far; moved on in place.
    raw : RawBlock
        In the order of arrival.
    stored : callable
        Returns what is stored for (measured time, sensor), or None. Asked only for readings that are not newer
        than all before, so hardly ever.

    Returns
    -------
    Admission
    """
    kept: list[int] = []
    late: list[int] = []
    contradictions: list[int] = []
    duplicates = 0
    here: dict[tuple[int, int], int] | None = None
    sensors, times = raw.sensor.tolist(), raw.measured_at_us.tolist()
    for index, (sensor, time_us) in enumerate(zip(sensors, times, strict=True)):
        if time_us > newest_us[sensor]:
            newest_us[sensor] = time_us
            kept.append(index)
            if here is not None:
                here[time_us, sensor] = index
            continue
        if here is None:
            here = {(times[earlier], sensors[earlier]): earlier for earlier in kept}
        known = _values(raw, here[time_us, sensor]) if (time_us, sensor) in here else stored(time_us, sensor)
        if known is None:
            here[time_us, sensor] = index
            kept.append(index)
            late.append(index)
        elif _is_same(known, _values(raw, index)):
            duplicates += 1
        else:
            contradictions.append(index)
    return Admission(_taken(raw, kept, late), duplicates, tuple(contradictions))


def _values(raw: RawBlock, index: int) -> AsSent:
    return float(raw.conductivity[index]), float(raw.temperature[index]), float(raw.pressure[index])


def _is_same(one: AsSent, other: AsSent) -> bool:
    return all(a == b or (a != a and b != b) for a, b in zip(one, other, strict=True))


def _taken(raw: RawBlock, kept: list[int], late: list[int]) -> RawBlock:
    if late:
        raw.flags[late] |= np.uint32(Flag.LATE)
    return raw if len(kept) == len(raw) else raw.take(np.array(kept, dtype=np.int64))
