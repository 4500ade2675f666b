"""One tank: what to do now, its history, what the animals feel, and whether the number can be believed."""

from __future__ import annotations

import math
from html import escape

from analysis.alarm.rationale import RATIONALE
from dashboard.browser import glyphs
from dashboard.browser.charts import Chart, multi_panel_chart
from dashboard.browser.sights import Snapshot, TankSight
from dashboard.browser.tank_chart import SPANS_S, Stretch
from dashboard.browser.views.card import animals_text, balance_words
from dashboard.browser.views.frame import framed, teach
from dashboard.browser.views.say import going, say, say_doubted, say_outside, say_unwatched, who_has_it
from dashboard.browser.views.sensors import trust_words
from dashboard.browser.visit import Visit, age, link
from ingest.words import numbers, times
from ingest.words.alarms import stress_band

PANEL_PADDING = 36


def page(snapshot: Snapshot, visit: Visit, *, tank: TankSight | None, chart: Chart | None, stretch: Stretch) -> str:
    """Return the page; without a tank of that name it says so and shows the way back."""
    if tank is None:
        body = teach(visit.text("no_such_tank"), link("tanks", visit.text("to_tanks"), classes="word"))
        return framed(snapshot, visit, title=visit.language.text("tank"), place=snapshot.site_name, body=body)
    body = (
        _action(tank, snapshot, visit)
        + f'<div class="two" data-k="two"><section class="panel">{_history(tank, visit, chart, stretch, snapshot)}</section>'
        + f'<div class="side">{_feel(tank, visit)}{_why(tank, visit)}{_believe(tank, snapshot, visit)}</div></div>'
    )
    return framed(snapshot, visit, title=tank.name, place=_place(tank, visit), body=body)


def _place(tank: TankSight, visit: Visit) -> str:
    volume = tank.volume_L
    litres = (
        f"{numbers.plain(volume / 1000, language=visit.language)} m³"
        if volume >= 1000
        else f"{numbers.plain(volume)} L"
    )
    parts = [tank.hall_name, litres]
    if tank.animals is not None:
        parts.insert(1, animals_text(tank, visit))
        if tank.animals.number:
            parts.insert(2, f"{tank.animals.number:,}".replace(",", "\u202f"))
    return " · ".join(parts)


def _action(tank: TankSight, snapshot: Snapshot, visit: Visit) -> str:
    if not tank.alarms:
        if tank.is_unwatched:
            return f'<div class="action" data-k="action">{say_unwatched(tank, snapshot, visit)}</div>'
        if tank.is_outside:
            return f'<div class="action" data-k="action">{say_outside(visit)}</div>'
        if tank.is_doubted:
            return f'<div class="action" data-k="action">{say_doubted(tank, visit)}</div>'
        return f'<p class="calm" data-k="calm">{visit.text("tank_calm")}</p>'
    lines = []
    for i, alarm in enumerate(tank.alarms):
        lines.append(
            f'<div data-k="{escape(alarm.key)}">{say(alarm, snapshot, visit, size=26)}'
            f'<div class="verbs">{going(alarm, snapshot, visit, is_main=i == 0)}'
            f'<span class="quiet">{who_has_it(alarm, snapshot, visit)}</span></div>{_then(alarm.condition, visit)}</div>'
        )
    return f'<div class="action" data-k="action">{"".join(lines)}</div>'


def _then(condition: str, visit: Visit) -> str:
    """Return what to do after the first action, and what happens if nobody does."""
    record = RATIONALE.get(condition)  # type: ignore[call-overload]
    if record is None:
        return ""
    steps = " ".join(escape(step.sentence) for step in record.steps[1:])
    return f'<p class="then"><b>{visit.text("then")}</b> {steps} <span class="quiet">{escape(record.consequence.sentence)}</span></p>'


def _history(tank: TankSight, visit: Visit, chart: Chart | None, stretch: Stretch, snapshot: Snapshot) -> str:
    buttons = "".join(
        f'<button data-do="span" data-span="{name}" aria-pressed="{str(stretch.name == name).lower()}">'
        f"{visit.text(f'span_{name}')}</button>"
        for name in SPANS_S
    )
    earlier = f'<button data-do="move" data-share="-0.5" aria-label="{visit.text("earlier_by_half")}">←</button>'
    later = (
        ""
        if stretch.is_live
        else f'<button data-do="move" data-share="0.5" aria-label="{visit.text("later_by_half")}">→</button>'
    )
    bar = (
        f'<div class="spans" role="group" aria-label="{visit.text("time_span")}">{buttons}{earlier}{later}'
        f'<span class="from">{escape(_from_to(stretch, snapshot, visit))}</span></div>'
    )
    if chart is None or not chart.panels:
        return f'{bar}<div data-measure></div><p class="quiet" style="padding:40px 0">{visit.text("no_history")}</p>'
    drawn = multi_panel_chart(chart, width=max(300, visit.width))
    hint = visit.text("chart_hint")
    return (
        f'{bar}<div class="chart" data-measure tabindex="0" aria-label="{hint}">{drawn}</div>'
        f'<p class="source">{hint} <span class="take">{_take(tank, snapshot, visit, stretch)}</span></p>'
    )


def _take(tank: TankSight, snapshot: Snapshot, visit: Visit, stretch: Stretch) -> str:
    """Return the ways to take the picture and the data along."""
    name = escape(f"{tank.id}-{round(stretch.from_s)}-{round(stretch.to_s)}")
    named = [
        times.moment(round(s * 1e6), snapshot.zone, now_us=snapshot.now_us, language=visit.language)
        for s in (stretch.from_s, stretch.to_s)
    ]
    period = visit.language.text("from_to", start=named[0], end=named[1])
    title = escape(
        f"{snapshot.site_name} · {tank.name} · {times.day(snapshot.now_us, snapshot.zone, has_year=True)} · {period}"
    )
    query = f"id={escape(tank.id)}&amp;from={stretch.from_s:.0f}&amp;to={stretch.to_s:.0f}"
    return (
        f'<a class="word" href="./export/tank.csv?{query}" download="{name}.csv">{visit.text("take_data")}</a>'
        f'<a class="word" href="#" data-do="picture" data-name="{name}.png" data-title="{title}">{visit.text("take_picture")}</a>'
    )


def _from_to(stretch: Stretch, snapshot: Snapshot, visit: Visit) -> str:
    def named(moment_s: float) -> str:
        return times.moment(round(moment_s * 1e6), snapshot.zone, now_us=snapshot.now_us, language=visit.language)

    end = visit.language.text("now") if stretch.is_live else named(stretch.to_s)
    return visit.language.text("from_to", start=named(stretch.from_s), end=end)


def _panel(key: str, title: str, inside: str) -> str:
    return f'<section class="panel" data-k="{key}"><h2 class="sub">{title}</h2>{inside}</section>'


def _feel(tank: TankSight, visit: Visit) -> str:
    balance = tank.balance
    water = "" if balance.water is None else numbers.number(balance.water, 0, language=visit.language)
    blood = "" if balance.blood is None else numbers.number(balance.blood, 0, language=visit.language)
    label = balance_words(tank, visit)
    drawn = glyphs.osmotic_balance_large(
        balance,
        label=label,
        water_word=visit.language.text("water_value", value=water),
        blood_word=visit.language.text("blood_value", value=blood),
        unit_word=visit.language.text("osmolality_unit"),
    )
    note = ""
    if tank.animals is not None and balance.blood is not None:
        note = f'<p class="source">{visit.text("blood_sampled" if tank.animals.is_blood_sampled else "blood_modelled")}</p>'
    key = "".join(f"<li>{x}</li>" for x in _figures(tank, visit))
    figures = (
        f'<p class="source">{visit.text("figures_from")}</p><ul class="source" style="padding-left:1.1em;margin-top:2px">{key}</ul>'
        if key
        else ""
    )
    return _panel("feel", visit.text("feel"), f"{drawn}<p>{escape(label)}</p>{note}{_beside(tank, visit)}{figures}")


def _beside(tank: TankSight, visit: Visit) -> str:
    """Return what the stress does not see; in water that is not of the sea the stress is said to be a part only."""
    found, language = tank.beside, visit.language
    lines = []
    if math.isfinite(found.oxygen_saturation_percent):
        share = numbers.quantity(found.oxygen_saturation_percent, "percent", language=language)
        lines.append(
            visit.text("beside_oxygen", share=share, value=numbers.number(found.oxygen_mg_L, 1, language=language))
        )
    if math.isfinite(found.unionised_ammonia_mg_L):
        value = numbers.number(found.unionised_ammonia_mg_L, 3, language=language)
        lines.append(visit.text("beside_ammonia", value=value))
    if math.isfinite(found.chloride_to_nitrite):
        lines.append(
            visit.text("beside_nitrite", value=numbers.number(found.chloride_to_nitrite, 0, language=language))
        )
    for short in found.short_of:
        key = "short_of_upper" if short.is_upper else "short_of_lower"
        lines.append(
            visit.text(
                key,
                quantity=short.quantity.removesuffix("_mg_L_CaCO3"),
                found=numbers.number(short.found, 1, language=language),
                limit=numbers.plain(short.limit, language=language),
                source=short.source,
            )
        )
    text = "".join(f"<p>{line}</p>" for line in lines)
    if found.is_osmotic_part_only and tank.animals is not None:
        text += f'<p class="source">{visit.text("osmotic_part_only")}</p>'
    return text


def _figures(tank: TankSight, visit: Visit) -> list[str]:
    if tank.animals is None:
        return []
    out = []
    for limits, kind in ((tank.animals.limits, tank.salinity_kind), (tank.animals.temperature_limits, "temperature")):
        for limit in limits:
            value = numbers.quantity(limit.value, kind, language=visit.language)
            text = visit.text("tolerated_from" if limit.is_lower else "tolerated_to", value=value, mark=limit.mark)
            out.append(f"{escape(visit.language.QUANTITIES[kind])} {text}")
    return out


def _why(tank: TankSight, visit: Visit) -> str:
    felt = tank.stress
    if felt is None:
        return ""
    stress = numbers.number(felt.stress, 0, language=visit.language)
    rows = "".join(
        f"<tr><td>{escape(visit.language.STRAINS[name])}</td>"
        f'<td style="width:45%"><span class="strain"><i style="width:{100 * min(strain, 1):.0f}%"></i></span></td>'
        f'<td class="n">{numbers.number(strain, 2, language=visit.language)}</td></tr>'
        for name, strain in sorted(felt.strains.items(), key=lambda item: -item[1] if math.isfinite(item[1]) else 1.0)
        if math.isfinite(strain)
    )
    word = stress_band(felt.stress, language=visit.language)
    caution = f'<p class="source">{visit.text("score_caution")}</p>'
    title = visit.text("why", stress=stress, word=word)
    return _panel("why", title, f"<table><tbody>{rows}</tbody></table>{caution}")


def _believe(tank: TankSight, snapshot: Snapshot, visit: Visit) -> str:
    if not tank.sensors:
        return _panel("believe", visit.text("believe"), f"<p>{visit.text('no_probe')}</p>")
    rows = ""
    for sensor in tank.sensors:
        word, reason = trust_words(sensor, snapshot, visit)
        value = numbers.quantity(
            sensor.salinity, tank.salinity_kind, uncertainty=sensor.salinity_uncertainty, language=visit.language
        )
        heard = age(
            sensor.measured_at_us, now_us=snapshot.now_us, stale_after_s=sensor.stale_after_s, language=visit.language
        )
        chosen = (
            f' <span class="quiet">{visit.text("stands_for_tank")}</span>'
            if sensor is tank.shown and len(tank.sensors) > 1
            else ""
        )
        rows += (
            f'<tr><th scope="row">{escape(sensor.name)}{chosen}</th><td>{escape(word)}<br><span class="quiet">{escape(reason)}</span></td>'
            f'<td class="n">{escape(value)}<br>{heard}</td></tr>'
        )
    return _panel("believe", visit.text("believe"), f"<table><tbody>{rows}</tbody></table>")
