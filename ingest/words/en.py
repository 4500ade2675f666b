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
    "g_kg": "salt",
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
    "until": "{left} until {quantity} {limit}",
    "per_hour": "{n} an hour",
    "per_ten_minutes": "{n} in 10 min",
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
            "Turning fresh: {value}, set {set_point}, falling {rate}.",
            "Turning fresh: {value}, limit {limit}, falling {rate}.",
            "Too fresh: {value}, set {set_point}.",
            "Too fresh: {value}, limit {limit}.",
            "The water is too fresh.",
        ),
        ("Close the fresh-water inflow. All aeration on. Stop feeding.",),
    ),
    "salinity_high": (
        "too salty",
        (
            "Turning salty: {value}, set {set_point}, rising {rate}.",
            "Turning salty: {value}, limit {limit}, rising {rate}.",
            "Too salty: {value}, set {set_point}.",
            "Too salty: {value}, limit {limit}.",
            "The water is too salty.",
        ),
        ("Close the brine or seawater inflow. Check the top-up of fresh water. All aeration on.",),
    ),
    "temperature_low": (
        "too cold",
        (
            "Cooling: {value}, set {set_point}, falling {rate}.",
            "Too cold: {value}, set {set_point}.",
            "Too cold: {value}, limit {limit}.",
            "The water is too cold.",
        ),
        ("Check heater, inflow and air. Switch power off before you reach into the water.",),
    ),
    "temperature_high": (
        "too warm",
        (
            "Warming: {value}, set {set_point}, rising {rate}.",
            "Too warm: {value}, set {set_point}.",
            "Too warm: {value}, limit {limit}.",
            "The water is too warm.",
        ),
        ("All aeration on. Check heater and chiller. Switch power off before you reach into the water.",),
    ),
    "changing_too_fast": (
        "changing too fast",
        (
            "Salinity is falling {falling}; {limit} an hour is allowed.",
            "Salinity is rising {rising}; {limit} an hour is allowed.",
            "The water is changing too fast: {rate}.",
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
    "clock_wrong": (
        "machine's clock wrong",
        ("The clock of this machine is {offset} off.", "The clock of this machine is wrong."),
        ("Check the time service of the machine.",),
    ),
    "species_backstop": (
        "beyond what they tolerate",
        (
            "Beyond what these animals tolerate: {value}, limit {limit}.",
            "Beyond what these animals tolerate.",
        ),
        ("Stop the exchange of water. All aeration on. Call the biologist.",),
    ),
    "work_not_back_in_band": (
        "not back after the work",
        ("The work is over, and the tank is not back in its band: {value}, set {set_point}.", "Not back in its band."),
        ("Finish the work, or bring the water back in small steps.",),
    ),
    "channel_low": (
        "too low",
        ("{channel} is too low: {value}, limit {limit}.", "{channel} is too low.", "A reading is too low."),
        ("Go to the tank and look.",),
    ),
    "channel_high": (
        "too high",
        ("{channel} is too high: {value}, limit {limit}.", "{channel} is too high.", "A reading is too high."),
        ("Go to the tank and look.",),
    ),
    "calibration_due": (
        "calibration due",
        ("{sensor} is due for calibration.", "A probe is due for calibration."),
        ("Calibrate it at the next quiet hour.",),
    ),
    "no_eyes_on_tank": (
        "nobody has looked",
        ("Nobody has looked at this tank since {since}.", "Nobody has looked at this tank for long."),
        ("Go and look at the animals.",),
    ),
    "probe_fault": (
        "probe fault",
        ("{sensor} can not be believed: {reason}.", "{sensor} can not be believed.", "A probe can not be believed."),
        ("Clean the probe and its cable end, then compare with a reading by hand.",),
    ),
    "unknown": ("needs a look", ("{code} in this tank.", "Something needs a look."), ("Go and look.",)),
}

# The message that calls a person. `trend_words`: if the sentence holds one of these, it tells the trend already.
CALLS: Final = {
    "title": "{priority}: {tank} {what}",
    "and_more": " and {n} more",
    "where": "{tank}: {what}",
    "now": "Now {quantity} {value}.",
    "falling": "Falling {rate} an hour.",
    "rising": "Rising {rate} an hour.",
    "no_trend": "No clear trend.",
    "trend_words": ("alling", "ising"),
    "normal_again": "It is back in its band by itself; look all the same.",
    "animals": "Animals: {animals}.",
    "animals_counted": "Animals: {animals}, {number}.",
    "left": "Time left: {left}.",
    "do": "First: {do}",
    "also": "Also: {tanks}.",
    "and_others": "And {n} more; see the board.",
    "reasons": {
        "nobody_answered": "Nobody has answered so far.",
        "not_turning_back": "Somebody is on it, and it is not turning back.",
        "worse": "It has got worse.",
        "joined": "One more tank has joined.",
    },
    "answer_board": "{person}, if you are going: acknowledge on the board, so that nobody else is called.",
    "answer_code": "{person}, if you are going: send this code to {topic} at {host}.",
    "stamp": "{site}, {time}",
    "problems": {
        "unsent": "messages to people do not go out since {since}",
        "nobody": "nobody is on duty: nobody could be called",
        "unheard": "the broker on which people answer cannot be reached",
        "no_sign": "the sign of life does not get through: {reason}",
        "addresses": "calls cannot leave: {reason}",
        "unwritten": "calls cannot be written down: {reason}",
    },
    "test_title": "Test: {site}",
    "test": "{person}, this is the daily test of the calls. Nothing is wrong. If it stays away, tell the others.",
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
    "noise": "noisy",
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

SENSOR_BELIEFS: Final = {0: "believe", 1: "doubt", 2: "do not use"}

SENSOR_FINDINGS: Final[dict[str, tuple[str, ...]]] = {
    "silent": ("silent for {silent_h:.1f} h", "never heard"),
    "values-missing": ("{missing_percent:.0f} % of its values are missing",),
    "in-air": ("in air: hardly any conductivity in {in_air_percent:.0f} % of the last hour",),
    "out-of-range": ("{out_of_range_percent:.0f} % of the last hour beyond what it can measure",),
    "stuck": ("stuck: the value does not move",),
    "attenuated": ("moves less than this water does",),
    "noisy": ("jumps about more than its water does",),
    "fouling": ("creeps away from its neighbour: {change_percent:+.1f} % in {days:.1f} days",),
    "slow-fall": ("falls slowly: {change_percent:+.1f} % in {days:.1f} days",),
    "neighbour-falls": ("its neighbour creeps down: clean that one",),
    "neighbour-disagrees": ("differs from its neighbour by {difference:+.2f} ({difference_percent:+.1f} %)",),
    "sample-disagrees": ("differs from the bench sample by {difference:+.2f}, allowed {allowed_difference:.2f}",),
    "sample-agrees": ("agrees with the bench sample within {allowed_difference:.2f}",),
    "compensation-doubted": (
        "the declared temperature compensation does not fit: {share_followed:.2f} of the change with temperature, expected"
        " {expected_share:.0f}",
    ),
    "calibration-overdue": ("calibration due since {overdue_days:.0f} days",),
    "unknown": ("something is wrong with it",),
}
"""Templates of each finding, the fullest first."""

REFUSALS: Final = {
    "unknown_topic": "No probe is declared for this topic.",
    "too_large": "The message is too large.",
    "unreadable": "It is not in the declared format.",
    "wrong_shape": "The fields are not where the site file says.",
    "version_unknown": "This version of SenML is not known here.",
    "must_understand": "It carries a label that must be understood and is not.",
    "no_known_name": "None of its names is declared in the site file.",
    "missing": "A declared value is missing.",
    "wrong_type": "There is something else where a number should be.",
    "not_finite": "A value is not a finite number.",
    "filler": 'The number stands for "no value".',
    "wrong_unit": "The unit is not the declared one.",
    "time_missing": "The declared time is missing.",
    "time_unreadable": "The time can not be read.",
    "time_beyond_horizon": "The time is too far in the past or the future.",
    "retained_without_time": "A kept message without its own time is never a reading.",
    "no_usable_value": "No usable value is in it.",
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
    "role_too_weak": "your role may not do this",
    "unknown_person": "the worker does not know you",
    "unknown_kind": "the worker does not know this action",
    "unusable_details": "something in it could not be read",
    "no_such_alarm": "there is no such alarm",
    "too_late": "it came too late",
    "nothing_to_acknowledge": "there is nothing to take any more",
    "already_acknowledged": "somebody already has it",
    "other_occurrence": "it has been raised anew since you saw it",
    "not_announced": "it has not been raised",
    "not_acknowledged": "nobody has it",
    "nothing_to_silence": "there is nothing to silence",
    "nothing_to_reset": "there is nothing to reset",
    "still_active": "the cause is still there",
    "cannot_be_shelved": "this alarm can not be shelved",
    "longer_than_allowed": "longer than is allowed",
    "ends_in_the_past": "its end lies in the past",
    "already_shelved": "it is shelved already",
    "hidden_otherwise": "it is put aside in another way",
    "not_shelved": "it is not shelved",
    "not_suppressed_by_this": "it is not suppressed by this",
    "already_out_of_service": "it is out of service already",
    "not_out_of_service": "it is not out of service",
    "nothing_hidden": "nothing is put aside",
    "without_reason": "a reason is needed",
    "no_such_cohort": "there is no such batch",
    "cohort_has_ended": "no animal of this batch is left",
    "changed_meanwhile": "somebody has changed it since you saw it",
    "before_the_last_entry": "it lies before the last entry of this batch",
    "no_such_tank": "there is no such tank",
    "no_such_animal": "no table knows these animals, or they are of another species",
    "id_is_taken": "this id has been used already",
    "unusable_id": "an id has lower-case letters, digits and single hyphens, a letter first",
    "unusable_number": "the number of animals can not be right",
    "not_so_many": "there are not so many animals",
    "already_there": "they are in this tank already",
    "another_stage": "these animals are of another stage",
    "dates_out_of_order": "hatch, metamorphosis and entry must follow each other",
    "no_such_sensor": "there is no such probe",
    "no_such_place": "there is no such tank or probe",
    "in_the_future": "its time lies in the future",
    "expired_standard": "the standard has expired: take a fresh one",
    "unusable_standard": "there is no standard of that value",
    "standard_temperature_unknown": "the standard is known from 0 to 55 °C only",
    "unusable_reading": "the reading can not be right",
    "factor_out_of_range": "reading and standard are too far apart: wrong bottle, or a broken cell",
    "not_linear": "the standards do not lie on one line: the cell needs service",
    "temperature_missing": "the temperature of the sample is needed",
    "another_plan_runs": "another plan runs on this tank: end it first",
    "no_plan_runs": "no plan runs on this tank",
    "plan_not_feasible": "this plan cannot be carried out",
    "plan_for_other_water": "the plan was made for another kind of water",
    "plan_for_other_animals": "the plan was made for other animals than those in this tank",
    "yes_missing": "a named person has to agree to everything that the plan asks for",
    "source_not_released": "a named person has to release each source water first",
    "plan_is_paused": "the plan is paused",
    "plan_not_paused": "the plan is not paused",
    "plan_is_halted": "the plan is halted: see why, then go on",
    "not_this_step": "another step is due, or none",
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

ALARM_ACTS: Final = {
    "raised": "raised",
    "returned": "back to normal",
    "returned_auto_acknowledged": "back to normal",
    "acknowledged": "taken",
    "unacknowledged": "given back",
    "re_alarmed": "raised again",
    "worsened": "became worse",
    "escalated": "passed on to the next person",
    "recovering": "recovering",
    "silenced": "silenced",
    "reset": "reset",
    "shelved": "shelved",
    "shelved_once": "shelved until it clears",
    "unshelved": "taken from the shelf",
    "shelving_ended": "shelving has ended",
    "suppressed": "suppressed by design",
    "unsuppressed": "no longer suppressed",
    "removed_from_service": "taken out of service",
    "returned_to_service": "back in service",
    "review_due": "review due",
}

BOARD: Final = {
    # the frame
    "tanks": "Tanks",
    "tank": "Tank",
    "alarms": "Alarms",
    "sensors": "Sensors",
    "night": "Night",
    "pages": "Pages",
    "day_rule": "The day so far, {alarms} raised",
    "connection_lost": "The connection to the board is lost. What you see here is old.",
    "no_worker": "Nobody is watching: the worker is not running (last sign of life: {since}). Values are old, alarms do not go out.",
    "no_store": "Nobody is watching yet: the worker has not run. Start it with: euryhale watch --site FILE",
    "caution_estimate": "Estimated osmolality is no laboratory measurement, and stress is a decision aid, not a diagnosis.",
    "caution_rounds": "A monitor does not replace rounds, nor an independent hard-wired alarm where minutes count.",
    # tanks
    "needs_now": "needs somebody now",
    "needs_today": "needs somebody today",
    "as_should_be": "as they should be",
    "unwatched_count": "unwatched",
    "leaving_band": "outside their band",
    "first": "First",
    "worst_first": "worst first",
    "rest": "As they should be",
    "by_place": "{count}, by place",
    "probes_heard": "{heard} of {all} probes heard on time",
    "as_cards": "show as cards",
    "as_tiles": "show as small tiles",
    "salinity": "salinity",
    "temperature": "temperature",
    "osmolality": "osmolality",
    "conductivity": "conductivity",
    "stress": "stress",
    "stress_unknown": "not known",
    "set": "set {point}",
    "tidal_band": "tide {low} to {high}",
    "no_set_point": "no set point",
    "no_animals": "no animals",
    "day_line": "Salinity of {tank} over the last day, over its set-point band",
    "and_more": "and {n} more",
    "no_tanks_title": "No tanks yet",
    "no_tanks": "The site file names what is installed. Add a hall, a tank and its probe, and the first value will stand here.",
    "no_tanks_1": "Write the tank and its sensor into the site file.",
    "no_tanks_2": "Check it: euryhale check FILE",
    "no_tanks_3": "Watch it: euryhale watch --site FILE",
    # saying
    "unwatched": "Unwatched.",
    "no_probe": "There is no probe in this tank. Read it by hand, or place one in the site file.",
    "never_heard": "Nothing has been heard from its probe yet. Check its power, its topic and the broker.",
    "silent": "No believable value comes in. Take a reading by hand now, then look at the probe and its cable.",
    "doubt": "As it should be, as far as can be told.",
    "outside": "Outside its band.",
    "outside_waits": "If it stays so, an alarm follows. Have a look if you are near.",
    "since": "since {moment}",
    "has_it": "{who} has it since {moment}",
    "going": "I am going",
    "not_sent": "could not be sent, please press again",
    # tank
    "tank_calm": "As it should be.",
    "no_such_tank": "There is no tank of this name.",
    "to_tanks": "See all tanks",
    "set_point": "set point {point}",
    "tolerated_from": "tolerated from {value} ({mark})",
    "tolerated_to": "tolerated to {value} ({mark})",
    "tolerated_from_short": "tolerated from {value}",
    "tolerated_to_short": "tolerated to {value}",
    "blood": "body fluid",
    "water_value": "water {value}",
    "blood_value": "body fluid {value}",
    "blood_modelled": "Body fluid is modelled from published figures; no sample was taken.",
    "blood_sampled": "Body fluid follows from a blood sample.",
    "osmolality_unit": "mOsm/kg, freezing-point basis",
    "chart_of": "History of {tank}: salinity, temperature, osmolality and stress on one time axis",
    "chart_hint": "Point at the chart to read it off; drag across it to look closer; arrow keys move the hair.",
    "take_data": "data (CSV)",
    "take_picture": "picture (PNG)",
    "then": "Then:",
    "time_span": "Stretch of time",
    "span_hour": "1 h",
    "span_six_hours": "6 h",
    "span_day": "day",
    "span_week": "week",
    "span_month": "month",
    "span_year": "year",
    "earlier_by_half": "Earlier",
    "later_by_half": "Later",
    "from_to": "{start} to {end}",
    "now": "now",
    "no_history": "Nothing is stored for this stretch of time.",
    "feel": "What the animals feel",
    "figures_from": "Published figures:",
    "beside_oxygen": "Oxygen: {share} of what this water can hold ({value} mg/L).",
    "beside_ammonia": "Un-ionised ammonia: {value} mg/L as nitrogen.",
    "beside_nitrite": "Chloride to nitrite: {value} to 1.",
    "short_of_lower": "This water is short of {quantity}: {found}, published threshold for white shrimp {limit} ({source}).",
    "short_of_upper": "{quantity} of this water is {found}, published threshold for white shrimp {limit} ({source}).",
    "osmotic_part_only": "The stress is the osmotic part only: this water is not shown to be like sea water in potassium, "
    "magnesium and calcium.",
    "why": "Why {stress}: {word}",
    "score_caution": "From published averages of other animals: look at yours.",
    "believe": "Can I believe it?",
    "stands_for_tank": "(stands for the tank)",
    # alarms
    "present": "Present alarms",
    "no_alarm": "Nothing is wrong.",
    "nobody_watches_title": "Nobody is watching",
    "nobody_watches": "No alarm can be raised while the worker is not running. Start it with: euryhale watch --site FILE",
    "put_aside": "Put aside",
    "put_aside_small": "shelved, suppressed or out of service: judged and recorded, but calling nobody",
    "history": "History",
    "lasted": "lasted",
    "taken": "taken by",
    "again": "raised again",
    "times": "{n} ×",
    "still_there": "still there",
    "by_nobody": "nobody",
    "after": "after {waited}",
    "when": "when",
    "where": "where",
    "what": "what",
    # sensors
    "probes": "Probes",
    "probe": "probe",
    "heard": "heard",
    "expected_every": "a value is due every {interval}",
    "no_sensors_title": "No probes yet",
    "no_sensors": "A probe is declared in the site file: which tank, which topic, which fields and units.",
    "no_sensors_1": "Add it under sensors: in the site file.",
    "no_sensors_2": "See what it really sends: euryhale check FILE --live",
    "refused": "What could not be used",
    "none_refused": "Every message could be used.",
    "refused_total": "{n} since the first day; the newest are listed",
    "topic": "topic",
    "why_refused": "why",
    "as_sent": "as sent",
    "refused_found": "At {place}: found {found}.",
    "refused_allowed": "Allowed: {allowed}.",
    "rest_kept": "The rest of the message was used.",
}
