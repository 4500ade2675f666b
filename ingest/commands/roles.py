"""Roles: each may do all that the one before may."""

from __future__ import annotations

from typing import Final

ROLES: Final = ("viewer", "operator", "biologist", "manager")


def is_at_least(role: str, needed: str) -> bool:
    """Return whether *role* may do what *needed* may; an unknown role may nothing."""
    return role in ROLES and ROLES.index(role) >= ROLES.index(needed)


def weaker(one: str, other: str) -> str:
    """Return the weaker of two roles; an unknown one is the weakest of all."""
    return min(one, other, key=lambda role: ROLES.index(role) if role in ROLES else -1)
