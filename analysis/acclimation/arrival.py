"""The sheet that travels with the animals: what they are used to, and what the receiving water must be told first."""

from __future__ import annotations

import math
from dataclasses import dataclass
from datetime import datetime
from typing import Final

from analysis.acclimation.ammonia import PackedWater, packed_time_left
from analysis.acclimation.cautions import ALWAYS
from analysis.acclimation.task import Water
from analysis.errors import InvalidInputError

NOT_MEASURED: Final = "not measured"
ASKED_BEFOREHAND: Final = (
    "salinity of the receiving water, and of what it is made (sea water, brine, inland water: potassium, magnesium, calcium)",
    "temperature and pH of the receiving water, at the hour of arrival",
    "alkalinity and, in fresh water, chloride",
    "chlorine or other disinfectant: none left, and who measured it",
    "aerated acclimation tank: volume, number, oxygen supply, who is there",
)
"""What the sender asks before dispatch; the answers go on the sheet."""


@dataclass(frozen=True, slots=True)
class DispatchSheet:
    """What goes with a consignment.

    Parameters
    ----------
    animal : str
        ``genus-species/stage``.
    number : int
        Animals.
    acclimated_to : Water
        The water that they have been used to.
    since : datetime
        Since when; aware.
    packed_at : datetime
        When the bags were closed; aware.
    packed : PackedWater
        Density, pH, oxygen, ammonia, as at dispatch or on arrival.
    bags, litres_per_bag : int, float
        How they travel.
    receiving : Water or None
        The receiving water as it was told; None: not yet told.
    answers : tuple of str
        Answers to `ASKED_BEFOREHAND`, in its order; empty where open.
    sender, receiver : str
        Names of persons.
    """

    animal: str
    number: int
    acclimated_to: Water
    since: datetime
    packed_at: datetime
    packed: PackedWater
    bags: int = 1
    litres_per_bag: float = math.nan
    receiving: Water | None = None
    answers: tuple[str, ...] = ()
    sender: str = ""
    receiver: str = ""

    def __post_init__(self) -> None:
        for what, moment in (("acclimated since", self.since), ("packed at", self.packed_at)):
            if moment.tzinfo is None:
                raise InvalidInputError(what, found=moment, allowed="a time with its zone")
        if self.number < 0 or self.bags < 1:
            raise InvalidInputError("number and bags", found=(self.number, self.bags), allowed="0 or more, 1 or more")
        if len(self.answers) > len(ASKED_BEFOREHAND):
            raise InvalidInputError("answers", found=len(self.answers), allowed=f"at most {len(ASKED_BEFOREHAND)}")

    @property
    def open_questions(self) -> tuple[str, ...]:
        """What the receiving side has not answered: no dispatch before it has."""
        answers = (*self.answers, *("",) * (len(ASKED_BEFOREHAND) - len(self.answers)))
        return tuple(question for question, answer in zip(ASKED_BEFOREHAND, answers, strict=True) if not answer.strip())


def sheet_lines(sheet: DispatchSheet) -> tuple[tuple[str, str], ...]:
    """Return the sheet as pairs of a heading and what stands beside it, in reading order."""
    water, packed = sheet.acclimated_to, sheet.packed
    settled_d = (sheet.packed_at - sheet.since).total_seconds() / 86_400.0
    left = packed_time_left(
        packed,
        salinity=water.salinity,
        temperature_degC=20.0 if math.isnan(water.temperature_degC) else water.temperature_degC,
        receiving_ph=math.nan if sheet.receiving is None else sheet.receiving.ph,
    )
    receiving = sheet.receiving
    told = (
        "not told yet"
        if receiving is None
        else f"salinity {receiving.salinity:g}, {_told(receiving.temperature_degC, 'degC')}, pH {_told(receiving.ph, '')}"
    )
    serves = (
        "not known" if math.isnan(left.hours) else "no limit known" if math.isinf(left.hours) else f"{left.hours:.1f} h"
    )
    return (
        ("Animals", f"{sheet.animal}, {sheet.number}"),
        (
            "Acclimated to",
            f"salinity {water.salinity:g}, {_told(water.temperature_degC, 'degC')}, pH {_told(water.ph, '')}",
        ),
        ("Since", f"{sheet.since:%Y-%m-%d %H:%M %z} ({settled_d:.1f} d before packing)"),
        ("Packed", f"{sheet.packed_at:%Y-%m-%d %H:%M %z}, {packed.hours_packed:g} h ago"),
        ("Bags", f"{sheet.bags}, {_told(sheet.litres_per_bag, 'L each')}"),
        ("Density", _told(packed.animals_per_L, "a litre")),
        ("pH in the bag", _told(packed.ph, "")),
        ("Oxygen in the bag", _told(packed.oxygen_mg_L, "mg/L")),
        ("Total ammonia in the bag", _told(packed.total_ammonia_mg_L, "mg N/L")),
        ("The bag still serves", f"{serves}: {left.reason}" + (f" ({left.source})" if left.source else "")),
        ("Receiving water", told),
        ("Asked beforehand, open", "; ".join(sheet.open_questions) or "nothing"),
        ("Sender, receiver", f"{sheet.sender or '-'}, {sheet.receiver or '-'}"),
    )


def sheet_cautions() -> tuple[str, ...]:
    """Return the cautions of the sheet."""
    return (
        "Do not aerate a closed bag hard before its ammonia and pH are known: the pH rises and with it the toxic share.",
        *ALWAYS,
    )


def _told(value: float, unit: str) -> str:
    return NOT_MEASURED if math.isnan(value) else f"{value:g} {unit}".rstrip()
