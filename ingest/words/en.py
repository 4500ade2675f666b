"""English. Every sentence that a person reads stands here and nowhere else; another language is a file like this.

The tables hold templates in the form of `str.format`. A template is used only if every value it names is known,
so the first of a list is the fullest and the last needs nothing. A first action marked "common practice" in
the table's comment has no published source; it defers to the site's own procedure.
"""

from __future__ import annotations

from typing import Final

NAME: Final = "English"
DECIMAL_MARK: Final = "."
MINUS: Final = "−"

WEEKDAYS: Final = ("Mon", "Tue", "Wed", "Thu", "Fri", "Sat", "Sun")
MONTHS: Final = ("Jan", "Feb", "Mar", "Apr", "May", "Jun", "Jul", "Aug", "Sep", "Oct", "Nov", "Dec")
NUMBER_WORDS: Final = (
    "No", "One", "Two", "Three", "Four", "Five", "Six", "Seven", "Eight", "Nine", "Ten", "Eleven", "Twelve",
)  # fmt: skip

UNITS: Final = {
    "salinity": "",
    "g_kg": "g/kg",
    "ppt": "ppt",
    "temperature": "°C",
    "osmolality": "mOsm/kg",
    "conductivity": "mS/cm",
    "density": "kg/m³",
    "pressure": "dbar",
    "stress": "",
    "percent": "%",
}

QUANTITIES: Final = {
    "salinity": "salinity",
    "temperature": "temperature",
    "osmolality": "osmolality",
    "conductivity": "conductivity",
    "stress": "stress",
    "density": "density",
}

TIMES: Final = {
    "just_now": "just now",
    "seconds_ago": "{n} s ago",
    "minutes_ago": "{n} min ago",
    "hours_ago": "{n} h ago",
    "days_ago": "{n} d ago",
    "ahead": "clock ahead",
    "never": "never",
    "seconds": "{n} s",
    "minutes": "{n} min",
    "hours": "{n} h",
    "hours_minutes": "{h} h {m} min",
    "days": "{n} d",
    "days_hours": "{d} d {h} h",
    "between": "about {best} ({low} to {high})",
    "about": "about {best}",
    "less_than_minute": "less than a minute",
}

PRIORITIES: Final = {
    "urgent": ("urgent", "U"),
    "soon": ("soon", "S"),
    "note": ("note", "N"),
}

# code -> title (a few words), what is wrong (fullest first), what to do first (fullest first).
# First actions: common practice; a low salinity: fresh water stopped first, all aeration on, feeding stopped,
# brine in small pre-dissolved doses (collected in the project's facts on species practice).
ALARMS: Final[dict[str, tuple[str, tuple[str, ...], tuple[str, ...]]]] = {
    "salinity_low": (
        "too fresh",
        (
            "Turning fresh: {value}, set {set_point}, falling {rate} an hour.",
            "Too fresh: {value}, set {set_point}.",
            "Too fresh: {value}, limit {limit}.",
            "The water is too fresh.",
        ),
        ("Close the fresh-water inflow. All aeration on. Stop feeding.",),
    ),
    "salinity_high": (
        "too salty",
        (
            "Turning salty: {value}, set {set_point}, rising {rate} an hour.",
            "Too salty: {value}, set {set_point}.",
            "Too salty: {value}, limit {limit}.",
            "The water is too salty.",
        ),
        ("Close the brine or seawater inflow. Check the top-up of fresh water. All aeration on.",),
    ),
    "temperature_low": (
        "too cold",
        ("Too cold: {value}, set {set_point}.", "Too cold: {value}, limit {limit}.", "The water is too cold."),
        ("Check heater, inflow and air. Switch power off before you reach into the water.",),
    ),
    "temperature_high": (
        "too warm",
        ("Too warm: {value}, set {set_point}.", "Too warm: {value}, limit {limit}.", "The water is too warm."),
        ("All aeration on. Check heater and chiller. Switch power off before you reach into the water.",),
    ),
    "changing_too_fast": (
        "changing too fast",
        (
            "Salinity is falling {falling} an hour; {limit} an hour is allowed.",
            "Salinity is rising {rising} an hour; {limit} an hour is allowed.",
            "The water is changing too fast: {rate} an hour.",
            "The water is changing too fast.",
        ),
        ("Stop the exchange: close the inflow. All aeration on.",),
    ),
    "heading_out_of_range": (
        "heading out of range",
        (
            "At this pace it passes {limit} in {left}.",
            "At this pace it leaves the range in {left}.",
            "The water is heading out of its range.",
        ),
        ("Look at the inflow now, while there is time.",),
    ),
    "stress": (
        "animals strained",
        (
            "The animals are {stress_band}: stress {stress} of 100, mostly from {driver}.",
            "The animals are strained: stress {stress} of 100.",
            "The animals are strained.",
        ),
        ("Stop feeding, all aeration on, do not handle them. Look at the animals.",),
    ),
    "sensors_disagree": (
        "probes disagree",
        (
            "{sensor} reads {difference} away from {other_sensor}.",
            "Two probes in this tank disagree by {difference}.",
            "Two probes in this tank disagree.",
        ),
        ("Take a reading by hand. Clean the probe that is wrong. Aerate: the water may lie in layers.",),
    ),
    "probe_dry_or_tank_empty": (
        "probe dry or tank empty",
        ("{sensor} reads almost no salt: the probe is dry, or the tank is empty.", "Probe dry or tank empty."),
        ("Go and look at the water level now.",),
    ),
    "unwatched": (
        "unwatched",
        ("Nobody sees this water: no probe to believe since {since}.", "Nobody sees this water: no probe to believe."),
        ("Take a reading by hand now. Then look at the probe and its cable.",),
    ),
    "sensor_clock_wrong": (
        "probe clock wrong",
        (
            "The clock of {sensor} is {offset} off. Its values are judged by the time they came in.",
            "A probe's clock is wrong.",
        ),
        ("Set the clock of the logger.",),
    ),
    "off_plan": (
        "off the plan",
        ("Off the plan: {value}, the plan says {set_point}.", "The tank has left its acclimation plan."),
        ("Hold the next step. See what the plan says to do from here.",),
    ),
    "ion_deficiency": (
        "ions short",
        (
            "{ion} is short: {value}, wanted at least {limit}.",
            "{ion} is short.",
            "An ion that the animals need is short.",
        ),
        ("See the mixing bench for what to add. Dissolve it first; add it slowly.",),
    ),
    "leaving_optimal_band": (
        "leaving the optimal band",
        ("Outside the optimal band ({limit}), still tolerated: {value}.", "Outside the optimal band, still tolerated."),
        ("Nothing urgent. Look why at the next round.",),
    ),
    "broker_unreachable": (
        "no messages arrive",
        ("No probe can be heard since {since}: the message broker does not answer.", "No probe can be heard."),
        ("Check the network and the broker's machine. Read the tanks by hand until it is back.",),
    ),
    "worker_stopped": (
        "nobody is watching",
        (
            "The worker has not written since {since}: nothing is judged.",
            "The worker is not running: nothing is judged.",
        ),
        ("Start the worker. Read the tanks by hand until it is back.",),
    ),
    "store_full": (
        "store nearly full",
        ("Only {left} of disk space is left for the records.", "The disk for the records is nearly full."),
        ("Free space on the disk of the store.",),
    ),
    "store_slow": ("store slow", ("Writing the records takes too long.",), ("Look at the disk of the store.",)),
    "forwarding_behind": (
        "forwarding behind",
        ("The central database is {left} behind.", "The central database is behind."),
        ("Nothing is lost: readings wait here. Check the uplink.",),
    ),
    "delivery_failing": (
        "calls do not go out",
        ("Messages to people do not go out since {since}.", "Messages to people do not go out."),
        ("Tell the people on duty yourself. Check the uplink and the test message.",),
    ),
    "machine_clock_wrong": (
        "machine's clock wrong",
        ("The clock of this machine is {offset} off.", "The clock of this machine is wrong."),
        ("Check the time service of the machine.",),
    ),
    "probe_fault": (
        "probe fault",
        ("{sensor} can not be believed: {reason}.", "{sensor} can not be believed.", "A probe can not be believed."),
        ("Clean the probe and its cable end, then compare with a reading by hand.",),
    ),
    "unknown": ("needs a look", ("{code} in this tank.", "Something needs a look."), ("Go and look.",)),
}

ALARM_STATES: Final = {
    "normal": "normal",
    "unacknowledged": "nobody has it yet",
    "acknowledged": "somebody is on it",
    "returned_unacknowledged": "back to normal, not seen by anybody",
    "latched_unacknowledged": "held until reset, nobody has it yet",
    "latched_acknowledged": "held until reset, somebody is on it",
    "shelved": "shelved",
    "suppressed_by_design": "suppressed by design",
    "out_of_service": "out of service",
}

STRESS_BANDS: Final = ((20.0, "settled"), (40.0, "adjusting"), (70.0, "strained"), (100.1, "in danger"))

STRAINS: Final = {
    "range": "salinity itself",
    "change": "change",
    "exposure": "exposure",
    "thermal": "temperature",
}

FLAGS: Final = {
    "extrapolated": "outside the published range, kept",
    "below_range": "almost no salt: taken as 0",
    "negative": "negative: not used",
    "not_finite": "not a number: not used",
    "out_of_range": "not possible: not used",
    "missing": "a value was missing",
    "filler": "a filler number, no value",
    "time_received": "timed when it came in",
    "late": "came late: kept, not alarmed",
    "gross_range": "outside this probe's span",
    "clock_doubted": "the probe's clock is off",
    "corrected": "corrected by calibration",
    "spike": "spike",
    "rate_of_change": "changed unusually fast",
    "flat_line": "stuck on one value",
    "attenuated": "hardly moves",
    "climatology": "unusual for the season",
    "multi_variate": "one channel moves alone",
    "neighbour": "disagrees with its neighbour",
    "in_air": "probe dry or tank empty",
    "gap": "came after a gap",
    "water_kind_doubted": "outside this water's table",
}

QUALITIES: Final = {1: "believe", 2: "not checked", 3: "doubt", 4: "do not believe", 9: "no value"}

SENSOR_STATES: Final = {"silent": "silent", "never": "nothing heard yet", "live": "live"}

REFUSALS: Final = {
    "not_json": "This is not the JSON that was declared.",
    "not_senml": "This is not the SenML that was declared.",
    "not_a_number": "A plain number was expected.",
    "not_text": "The bytes are not readable text.",
    "wrong_shape": "The fields are not where the site file says.",
    "missing": "A value is missing.",
    "no_value": "No usable value is in it.",
    "not_finite": "A value is not a finite number.",
    "filler": 'The number stands for "no value".',
    "bad_time": "The time can not be read.",
    "time_missing": "The declared time field is missing.",
    "beyond_horizon": "The time is too far in the past or the future.",
    "too_old": "The time is too far in the past.",
    "in_future": "The time is too far in the future.",
    "unknown_topic": "No probe is declared for this topic.",
    "retained": "A kept message without its own time is never a reading.",
    "too_large": "The message is too large.",
    "conflict": "Another value for the same moment is already stored.",
    "unknown": "It could not be used.",
}

COMMAND_STATES: Final = {
    "waiting": "sent, waiting for the worker",
    "no_worker": "waiting: the worker is not running",
    "applied": "done",
    "refused": "refused: {reason}",
    "expired": "too late: it was not applied",
}

COMMAND_REASONS: Final = {
    "role": "your role may not do this",
    "changed": "the alarm has changed since you saw it",
    "unknown_subject": "there is no such thing any more",
    "unknown_kind": "the worker does not know this action",
    "bad_body": "something in it could not be read",
    "duplicate": "it was already done",
    "unknown": "the worker refused it",
}

BALANCE: Final = {
    "out": "Water leaves the animals: the water is {gap} mOsm/kg stronger than their blood.",
    "in": "Water enters the animals: the water is {gap} mOsm/kg weaker than their blood.",
    "level": "Water and blood are level: hardly any water moves.",
    "unknown": "The blood value of these animals is not known; only the water and its limits are shown.",
    "empty": "No animals are entered in this tank.",
    "no_water": "No believable value of the water.",
}

PROVENANCE: Final = {
    "looked_up": "looked up",
    "looked_up_proxy_species": "proxy species",
    "derived": "derived",
    "from_memory": "from memory",
    "assumed": "assumed",
    "unknown": "source not known",
}

COUNTS: Final = {
    "tanks_fine": (
        "No tank is as it should be.",
        "One tank is as it should be.",
        "{words} tanks are as they should be.",
    ),
    "tanks_unwatched": ("", "One tank is unwatched.", "{words} tanks are unwatched."),
    "tanks": ("no tanks", "1 tank", "{n} tanks"),
    "alarms": ("no alarms", "1 alarm", "{n} alarms"),
    "sensors": ("no probes", "1 probe", "{n} probes"),
}

BOARD: Final = {
    "tanks": "Tanks",
    "tank": "Tank",
    "alarms": "Alarms",
    "sensors": "Sensors",
    "night": "Night",
}
