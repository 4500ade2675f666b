"""Topics of MQTT: what a sensor's topic may be, and the topics that are the tool's own. See TOPICS.md."""

from __future__ import annotations

OWN_ROOT = "euryhale"
"""First level of every topic on which the tool itself speaks."""
LONGEST_TOPIC_BYTES = 65_535


def own_topic(site_id: str, *levels: str) -> str:
    """Return a topic on which the tool speaks for a site.

    Parameters
    ----------
    site_id : str
        Id of the site.
    *levels : str
        The levels below it.
    """
    return "/".join((OWN_ROOT, site_id, *levels))


def worker_status_topic(site_id: str) -> str:
    """Return the topic of the worker's retained status: running, stopped, or lost (the last will)."""
    return own_topic(site_id, "worker", "status")


def fault_of_topic(topic: str) -> str | None:
    """Return what a sensor's topic should be instead, None where nothing is wrong with it.

    References
    ----------
    MQTT Version 5.0, OASIS Standard, 2019, section 4.7: wildcards, the topics that begin with $, and the length.
    """
    if "+" in topic or "#" in topic:
        return "one topic a sensor, no wildcard (+ or #): it would also take the readings of other sensors"
    if topic.startswith("$"):
        return "a topic that does not begin with $: those belong to the broker"
    if topic.startswith(f"{OWN_ROOT}/"):
        return f"a topic that does not begin with {OWN_ROOT}/: there the tool itself speaks"
    if topic.startswith("/") or topic.endswith("/") or "//" in topic:
        return "levels with a name each, joined by single slashes"
    if len(topic.encode("utf-8", "replace")) > LONGEST_TOPIC_BYTES or "\0" in topic or topic != topic.strip():
        return f"at most {LONGEST_TOPIC_BYTES} bytes, no blank at the ends"
    return None
