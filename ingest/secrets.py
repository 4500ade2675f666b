"""Secrets: one file each, readable by its owner only, beside the site file; never in the site file, a log or a page."""

from __future__ import annotations

import os
import re
from typing import TYPE_CHECKING

from analysis.errors import EuryhaleError, InvalidInputError

if TYPE_CHECKING:
    from pathlib import Path

FOLDER = "secrets"
_NAME = re.compile(r"[a-z][a-z0-9-]{0,39}")
OWNER_ONLY = 0o600


class MissingSecretError(EuryhaleError):
    """A secret that the site file names is not set."""

    def __init__(self, name: str) -> None:
        self.name = name
        super().__init__(f"secret {name!r} is not set; set it with: euryhale secret set {name}")


def secret_path(name: str, *, site_file: Path) -> Path:
    """Return where the secret *name* of a site lies.

    Raises
    ------
    InvalidInputError
        If the name could leave the folder or is not a slug.
    """
    if not _NAME.fullmatch(name):
        raise InvalidInputError(
            "name of a secret", found=name, allowed="lower-case letters, digits, hyphens; a letter first"
        )
    return site_file.resolve().parent / FOLDER / name


def read_secret(name: str, *, site_file: Path) -> str:
    """Return a secret.

    Raises
    ------
    MissingSecretError
        If it is not set.
    """
    path = secret_path(name, site_file=site_file)
    try:
        return path.read_text(encoding="utf-8")
    except FileNotFoundError as error:
        raise MissingSecretError(name) from error


def write_secret(name: str, value: str, *, site_file: Path) -> Path:
    """Keep a secret in a file that only its owner can read, and return its path."""
    path = secret_path(name, site_file=site_file)
    path.parent.mkdir(mode=0o700, parents=True, exist_ok=True)
    fresh = path.with_suffix(".new")
    descriptor = os.open(fresh, os.O_WRONLY | os.O_CREAT | os.O_TRUNC, OWNER_ONLY)
    os.fchmod(descriptor, OWNER_ONLY)  # Where a file was left over, opening it does not change its mode.
    with os.fdopen(descriptor, "w", encoding="utf-8") as file:
        file.write(value)
    fresh.replace(path)
    return path
