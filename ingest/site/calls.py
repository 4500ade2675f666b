"""Who is called, by what, when; how people answer; and the signs of life that leave the site. All of it may be left out."""

from __future__ import annotations

import datetime
from typing import Annotated, Literal

from pydantic import Field, NaiveDatetime, StringConstraints

from ingest.site.section import Section, Slug, Words, one_of, quantity, slug, whole, words

ChannelKind = Literal["mail", "sms", "push", "voice", "webhook"]
CHANNEL_KINDS = ("mail", "sms", "push", "voice", "webhook")
RINGING_KINDS = frozenset({"sms", "push", "voice"})
"""Channels that make a sound beside a sleeping person unless the site file says otherwise. Common practice."""
Weekday = Literal["mon", "tue", "wed", "thu", "fri", "sat", "sun"]
WEEKDAYS: tuple[Weekday, ...] = ("mon", "tue", "wed", "thu", "fri", "sat", "sun")
LesserPriority = Literal["note", "soon"]
LESSER_PRIORITIES: tuple[LesserPriority, ...] = ("note", "soon")
TIME_WORDS = "a time of day in quotes, such as '18:00'"
MOMENT_WORDS = "date and time of the site's clock, such as 2026-12-24T18:00"
BY_WORDS = f"a list of channels: {', '.join(CHANNEL_KINDS)} (every channel of the person where not given)"

TIME_PATTERN = r"^(([01][0-9]|2[0-3]):[0-5][0-9]|24:00)$"
TimeOfDay = Annotated[str, StringConstraints(pattern=TIME_PATTERN)]


def minutes_of(text: str) -> int:
    """Return the minutes since midnight of a `TimeOfDay`."""
    hours, minutes = text.split(":")
    return int(hours) * 60 + int(minutes)


class Channel(Section):
    """One way to a person. The address is a secret: it holds passwords and telephone numbers."""

    kind: ChannelKind = one_of(*CHANNEL_KINDS)
    url_secret: Slug = slug("name of the secret that holds the address, set with `euryhale secret set`")
    rings: bool | None = Field(None, description="true or false: whether it wakes a sleeping person")

    @property
    def is_ringing(self) -> bool:
        """Return whether it wakes a sleeping person."""
        return self.kind in RINGING_KINDS if self.rings is None else self.rings


class Person(Section):
    """Somebody who can be called."""

    id: Slug = slug("id of the person")
    name: Words = words("name of the person")
    role: Literal["operator", "biologist", "manager"] = one_of("operator", "biologist", "manager", default="operator")
    channels: tuple[Channel, ...] = Field(min_length=1, description="a list of {kind, url_secret, rings}, at least one")


class DutyShift(Section):
    """A shift that comes back every week, on the site's clock; an end at or before its begin lies on the next day."""

    who: Slug = slug("id of a person")
    begin: TimeOfDay = Field(description=TIME_WORDS)
    end: TimeOfDay = Field(description=TIME_WORDS)
    weekdays: tuple[Weekday, ...] = Field(
        WEEKDAYS, min_length=1, description=f"a list of {', '.join(WEEKDAYS)}: the days on which it begins"
    )
    days: Literal["any", "workday", "holiday"] = one_of("any", "workday", "holiday", default="any")
    first_day: datetime.date | None = Field(None, description="a date as 2026-01-31")
    last_day: datetime.date | None = Field(None, description="a date as 2026-01-31")


class DutyStandIn(Section):
    """Somebody takes another's shifts for a time."""

    absent: Slug = slug("id of a person")
    who: Slug = slug("id of a person")
    begin: NaiveDatetime = Field(description=MOMENT_WORDS)
    end: NaiveDatetime = Field(description=MOMENT_WORDS)


class Quiet(Section):
    """Hours in which alarms of low priority wait."""

    begin: TimeOfDay = Field(description=TIME_WORDS)
    end: TimeOfDay = Field(description=TIME_WORDS)
    priorities: tuple[LesserPriority, ...] = Field(
        LESSER_PRIORITIES, min_length=1, description="a list of note, soon: what is urgent is never kept waiting"
    )


class Duty(Section):
    """The section `duty:`."""

    shifts: tuple[DutyShift, ...] = Field(default=(), description="a list of {who, begin, end, weekdays, days}")
    holidays: tuple[datetime.date, ...] = Field(default=(), description="a list of dates as 2026-12-25")
    stand_ins: tuple[DutyStandIn, ...] = Field(default=(), description="a list of {absent, who, begin, end}")
    quiet_hours: tuple[Quiet, ...] = Field(default=(), description="a list of {begin, end, priorities}")


class CallLine(Section):
    """One line of the section `call_out:`; after the last line the list begins anew."""

    who: str = Field(description="duty, second duty, or the id of a person")
    by: tuple[ChannelKind, ...] = Field((), description=BY_WORDS)
    wait_min: float = quantity(0.1, 240, "min", 5)


class LifeSign(Section):
    """The section `heartbeat:`: a POST to an address outside, whose owner raises the alarm when it stays away."""

    url_secret: Slug = slug("name of the secret that holds the http or https address")
    every_s: float = quantity(1, 86_400, "s", 60)


class TestMessage(Section):
    """The section `test_message:`: once a day, to whoever is on duty, along the way of a real call."""

    __test__ = False

    at: TimeOfDay = Field(description=TIME_WORDS)


class Answers(Section):
    """The section `acknowledgements:`: a broker outside that the site dials, so that people can answer without a way in."""

    host: Words = words("host name or address of the broker outside")
    port: int = whole(1, 65535, 8883)
    topic: Words = words("topic to which the code of a message is sent")
    user: Words | None = words("user name at that broker", None)
    secret: Slug | None = slug("name of a secret set with `euryhale secret set`", None)
    tls: bool = Field(default=True, description="true or false")
    ca_file: Words | None = words("file of the certificate authority, relative to the site file", None)
