"""The one root of every error this project raises itself."""

from __future__ import annotations


class EuryhaleError(Exception):
    """Root of all errors of euryhale. The message says what, which value, what is allowed, and the unit."""


class InvalidInputError(EuryhaleError):
    """A value that cannot be used.

    Parameters
    ----------
    what : str
        The quantity or key complained of.
    found : object
        The value that was given.
    allowed : str
        What would have been right, with its unit.
    where : str, optional
        File, line, row or option in which it stood.
    """

    def __init__(self, what: str, *, found: object, allowed: str, where: str = "") -> None:
        self.what = what
        self.found = found
        self.allowed = allowed
        self.where = where
        place = f"{where}: " if where else ""
        super().__init__(f"{place}{what}: found {found!r}; allowed: {allowed}")


class MissingPackageError(EuryhaleError):
    """An optional package is not installed.

    Parameters
    ----------
    package : str
        The package that is missing.
    extra : str
        The extra of euryhale that brings it.
    need : str
        What it is needed for.
    """

    def __init__(self, package: str, *, extra: str, need: str) -> None:
        self.package = package
        self.extra = extra
        self.need = need
        super().__init__(f"{need} needs the package {package!r}; install it with: pip install 'euryhale[{extra}]'")
