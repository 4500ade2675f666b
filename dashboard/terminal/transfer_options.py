"""Options that `acclimate` and `correct` share, and the task and limits that they describe."""

from __future__ import annotations

import math
from datetime import datetime, time, tzinfo
from typing import TYPE_CHECKING
from zoneinfo import ZoneInfo

from analysis.acclimation.ammonia import PackedWater
from analysis.acclimation.limits import Limits, Override, default_limits
from analysis.acclimation.source import SEAWATER, SODIUM_CHLORIDE, Release, Salt, SourceWater
from analysis.acclimation.task import AcclimationTask, Allowances, Grid, Method, Rest, Vessel, Water
from analysis.animal import tables
from analysis.errors import InvalidInputError
from ingest.clock import SystemClock, to_datetime

if TYPE_CHECKING:
    import argparse

    from analysis.animal.stage import Stage

SOURCE_FORM = "NAME:SALINITY:TEMPERATURE[:MAX_L_PER_H]"
NOT_GIVEN = math.nan


def add_options(parser: argparse.ArgumentParser) -> None:
    """Add the options that both commands share."""
    parser.add_argument("--animal", required=True, metavar="SPECIES/STAGE", help="see `euryhale species`")
    parser.add_argument("--from-salinity", required=True, type=float, help="the water they are in now")
    parser.add_argument("--to-salinity", required=True, type=float, help="the water they go to")
    parser.add_argument("--from-temperature", type=float, help="[degC] (default: that of the first source)")
    parser.add_argument("--to-temperature", type=float, help="[degC] (default: free within the limits)")
    parser.add_argument("--used-to-salinity", type=float, help="the water they are used to (default: --from-salinity)")
    parser.add_argument("--json", action="store_true", help="print one JSON object")
    _add_water_options(parser.add_argument_group("vessel and waters"))
    _add_time_options(parser.add_argument_group("time and rounding"))
    _add_limit_options(parser.add_argument_group("limits"))


def _add_water_options(group: argparse._ArgumentGroup) -> None:
    group.add_argument("--volume-L", required=True, type=float, dest="volume_L", help="water in the vessel now")
    group.add_argument(
        "--max-volume-L", type=float, dest="max_volume_L", help="what it holds, for --method add and dose"
    )
    group.add_argument("--vessel", choices=("tank", "bag", "bucket"), default="tank")
    group.add_argument("--source", action="append", default=[], metavar=SOURCE_FORM, help="a source water; repeatable")
    group.add_argument("--source-ph", action="append", default=[], metavar="NAME:PH", help="repeatable")
    group.add_argument(
        "--source-amount", action="append", default=[], metavar="NAME:LITRES", help="what there is of it"
    )
    group.add_argument(
        "--source-kind", action="append", default=[], metavar="NAME:KIND", help=f"{SEAWATER} or {SODIUM_CHLORIDE}"
    )
    group.add_argument(
        "--released",
        action="append",
        default=[],
        metavar="NAME=PERSON,UNTIL,CHLORINE_MG_L[,CHLORIDE_MG_L]",
        help="a source released by a named person; UNTIL is a time",
    )
    group.add_argument("--method", choices=tuple(method.value for method in Method), default=Method.STEPS.value)
    group.add_argument(
        "--salt", metavar="NAME[:DRY_FRACTION]", help="for --method dose: salt, dissolved before it goes in"
    )
    group.add_argument("--plain-salt", action="store_true", help="the salt is plain sodium chloride")
    group.add_argument("--plain-salt-reason", default="", help="who allows plain salt for raising sea water, and why")
    group.add_argument(
        "--water", choices=(SEAWATER, SODIUM_CHLORIDE), default=SEAWATER, help="kind of water in the vessel"
    )
    group.add_argument("--ph", type=float, help="of the vessel's water")


def _add_time_options(group: argparse._ArgumentGroup) -> None:
    group.add_argument("--start", metavar="TIME", help="2026-12-01T08:00, or 08:00 for today (default: now)")
    group.add_argument("--zone", help="IANA time zone of the site (default: of this machine)")
    group.add_argument("--work", metavar="HH:MM-HH:MM", help="working hours (default: day and night)")
    group.add_argument(
        "--rest", action="append", default=[], metavar="HH:MM-HH:MM", help="no step in this time; repeatable"
    )
    group.add_argument("--litres", type=float, help="round litres to this (default: by the volume)")
    group.add_argument(
        "--clock-min", type=float, default=5.0, help="steps begin at multiples of this [min] (default: 5)"
    )
    group.add_argument(
        "--tolerance", type=float, help="how near to the target is arrived (default: 0.25; 0.1 from 0.25 to 2.5)"
    )


def _add_limit_options(group: argparse._ArgumentGroup) -> None:
    group.add_argument("--governs", choices=("hour", "day"), help="which published rate of salinity governs")
    group.add_argument(
        "--override",
        action="append",
        default=[],
        metavar="LIMIT=VALUE",
        help="another value, or `none`; needs --by, --because",
    )
    group.add_argument("--by", default="", help="who overrides or confirms")
    group.add_argument("--because", default="", help="the reason of the overrides")
    group.add_argument(
        "--confirm", action="append", default=[], metavar="GATE", help="a gate that --by confirms; repeatable"
    )
    group.add_argument("--allow-volume-percent", type=float, default=10.0, help="error of the volume to allow for (10)")
    group.add_argument("--allow-source", type=float, default=1.0, help="error of a source's salinity to allow for (1)")
    group.add_argument(
        "--allow-late-min", type=float, default=20.0, help="lateness of an operator to allow for [min] (20)"
    )
    group.add_argument("--hours-packed", type=float, help="hours in the closed bag")
    group.add_argument("--ammonia", type=float, help="total ammonia nitrogen in the bag [mg N/L]")
    group.add_argument("--oxygen", type=float, help="in the bag [mg/L]")
    group.add_argument("--density", type=float, help="animals a litre")
    group.add_argument("--aerated", action="store_true", help="the bag's water is aerated now")


def stage_of(args: argparse.Namespace) -> Stage:
    """Return the stage that ``--animal`` names."""
    return tables.find(args.animal)


def limits_of(args: argparse.Namespace, stage: Stage) -> Limits:
    """Return the limits with the overrides and confirmations given."""
    overrides = [_override(text, by=args.by, reason=args.because) for text in args.override]
    if args.confirm and not args.by.strip():
        raise InvalidInputError("--confirm", found=args.confirm, allowed="together with --by NAME")
    return default_limits(
        stage,
        from_salinity=args.from_salinity,
        to_salinity=args.to_salinity,
        used_to_salinity=args.used_to_salinity,
        governs=args.governs,
        overrides=overrides,
        confirmed=dict.fromkeys(args.confirm, args.by),
    )


def _override(text: str, *, by: str, reason: str) -> Override:
    name, equals, value = text.partition("=")
    if not equals:
        raise InvalidInputError("--override", found=text, allowed="LIMIT=VALUE, for example 'salinity per hour=2'")
    number = None if value.strip() == "none" else _number(value, where="--override")
    return Override(name.strip(), number, by, reason)


def task_of(args: argparse.Namespace, stage: Stage) -> AcclimationTask:
    """Return the task that the options describe.

    Raises
    ------
    InvalidInputError
        With the option that cannot be used.
    """
    zone = zone_of(args.zone)
    sources = _sources(args, zone)
    warmth = args.from_temperature
    if warmth is None:
        if not sources:
            raise InvalidInputError("--from-temperature", found="not given", allowed="degC, where there is no --source")
        warmth = sources[0].temperature_degC
    return AcclimationTask(
        animal=stage.id,
        start=Water(args.from_salinity, warmth, _or_nan(args.ph)),
        target=Water(args.to_salinity, _or_nan(args.to_temperature)),
        vessel=Vessel(args.volume_L, _or_nan(args.max_volume_L), args.vessel),
        sources=sources,
        begins_at=_begin(args.start, zone),
        method=Method(args.method),
        salt=_salt(args),
        used_to_salinity=_or_nan(args.used_to_salinity),
        working_hours=None if args.work is None else _span(args.work, where="--work"),
        rests=tuple(Rest(*_span(text, where="--rest")) for text in args.rest),
        tolerance_salinity=_or_nan(args.tolerance),
        allowances=Allowances(args.allow_volume_percent / 100.0, args.allow_source, args.allow_late_min),
        grid=Grid(litres=_or_nan(args.litres), clock_min=args.clock_min, longest_step_min=max(30.0, args.clock_min)),
        packed=_packed(args),
        water_kind=args.water,
        plain_salt_reason=args.plain_salt_reason,
    )


def _or_nan(value: float | None) -> float:
    return NOT_GIVEN if value is None else value


def _number(text: str, *, where: str) -> float:
    try:
        value = float(text)
    except ValueError as error:
        raise InvalidInputError(where, found=text, allowed="a number") from error
    if not math.isfinite(value):
        raise InvalidInputError(where, found=text, allowed="a finite number")
    return value


def _sources(args: argparse.Namespace, zone: tzinfo) -> tuple[SourceWater, ...]:
    acidity = _by_name(args.source_ph, "--source-ph")
    amounts = _by_name(args.source_amount, "--source-amount")
    kinds = _by_name(args.source_kind, "--source-kind")
    releases = dict(_release(text, zone) for text in args.released)
    sources = tuple(
        _source(text, acidity=acidity, amounts=amounts, kinds=kinds, releases=releases) for text in args.source
    )
    known = {source.name for source in sources}
    for name in {*acidity, *amounts, *kinds, *releases}:
        if name not in known:
            raise InvalidInputError(
                "name of a source", found=name, allowed=", ".join(sorted(known)) or "one of --source"
            )
    return sources


def _source(
    text: str, *, acidity: dict[str, str], amounts: dict[str, str], kinds: dict[str, str], releases: dict[str, Release]
) -> SourceWater:
    parts = text.split(":")
    if len(parts) not in {3, 4}:
        raise InvalidInputError("--source", found=text, allowed=SOURCE_FORM)
    name = parts[0].strip()
    kind = kinds.get(name, SEAWATER)
    if kind not in {SEAWATER, SODIUM_CHLORIDE}:
        raise InvalidInputError("--source-kind", found=kind, allowed=f"{SEAWATER} or {SODIUM_CHLORIDE}")
    numbers = [_number(part, where=f"--source {name}") for part in parts[1:]]
    return SourceWater(
        name=name,
        salinity=numbers[0],
        temperature_degC=numbers[1],
        kind=kind,
        ph=_number(acidity[name], where="--source-ph") if name in acidity else NOT_GIVEN,
        max_L_per_h=numbers[2] if len(numbers) == 3 else math.inf,
        available_L=_number(amounts[name], where="--source-amount") if name in amounts else math.inf,
        release=releases.get(name),
    )


def _by_name(texts: list[str], option: str) -> dict[str, str]:
    pairs = {}
    for text in texts:
        name, colon, value = text.partition(":")
        if not colon:
            raise InvalidInputError(option, found=text, allowed="NAME:VALUE")
        pairs[name.strip()] = value.strip()
    return pairs


def _release(text: str, zone: tzinfo) -> tuple[str, Release]:
    name, equals, told = text.partition("=")
    parts = [part.strip() for part in told.split(",")]
    if not equals or len(parts) not in {3, 4}:
        raise InvalidInputError("--released", found=text, allowed="NAME=PERSON,UNTIL,CHLORINE_MG_L[,CHLORIDE_MG_L]")
    ions = {"chloride": _number(parts[3], where="--released")} if len(parts) == 4 else {}
    return name.strip(), Release(
        by=parts[0],
        valid_until=moment_of(parts[1], zone, where="--released"),
        chlorine_mg_L=_number(parts[2], where="--released"),
        ions_mg_L=ions,
    )


def _salt(args: argparse.Namespace) -> Salt | None:
    if args.salt is None:
        return None
    name, _, fraction = args.salt.partition(":")
    dry = _number(fraction, where="--salt") if fraction else 1.0
    return Salt(name.strip(), dry_fraction=dry, is_sodium_chloride=args.plain_salt)


def _packed(args: argparse.Namespace) -> PackedWater | None:
    told = (args.hours_packed, args.ammonia, args.oxygen, args.density)
    if all(value is None for value in told):
        return None
    return PackedWater(
        hours_packed=0.0 if args.hours_packed is None else args.hours_packed,
        total_ammonia_mg_L=_or_nan(args.ammonia),
        ph=_or_nan(args.ph),
        oxygen_mg_L=_or_nan(args.oxygen),
        animals_per_L=_or_nan(args.density),
        is_aerated=args.aerated,
    )


def zone_of(name: str | None) -> tzinfo:
    """Return the zone of an IANA name; of this machine where none is given."""
    if name is None:
        local = to_datetime(SystemClock().now_us()).astimezone().tzinfo
        assert local is not None  # noqa: S101 - astimezone() always sets one
        return local
    try:
        return ZoneInfo(name)
    except (KeyError, ValueError, OSError) as error:
        raise InvalidInputError("--zone", found=name, allowed="an IANA name, for example Europe/Lisbon") from error


def _begin(text: str | None, zone: tzinfo) -> datetime:
    now = to_datetime(SystemClock().now_us()).astimezone(zone)
    if text is None:
        return now.replace(second=0, microsecond=0)
    if len(text) <= 5:
        clock = _clock(text, where="--start")
        return now.replace(hour=clock.hour, minute=clock.minute, second=0, microsecond=0)
    return moment_of(text, zone, where="--start")


def moment_of(text: str, zone: tzinfo, *, where: str) -> datetime:
    """Return the moment that *text* names, in *zone* where it has no offset."""
    try:
        moment = datetime.fromisoformat(text)
    except ValueError as error:
        raise InvalidInputError(where, found=text, allowed="a time such as 2026-12-01T08:00") from error
    return moment.replace(tzinfo=zone) if moment.tzinfo is None else moment.astimezone(zone)


def _clock(text: str, *, where: str) -> time:
    try:
        return time.fromisoformat(text.zfill(5))
    except ValueError as error:
        raise InvalidInputError(where, found=text, allowed="HH:MM") from error


def _span(text: str, *, where: str) -> tuple[time, time]:
    begins, dash, ends = text.partition("-")
    if not dash:
        raise InvalidInputError(where, found=text, allowed="HH:MM-HH:MM")
    return _clock(begins.strip(), where=where), _clock(ends.strip(), where=where)
