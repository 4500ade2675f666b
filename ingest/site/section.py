"""What every section of the site file has in common: frozen, no unknown key, every limit in words."""

from __future__ import annotations

from typing import Annotated, Any

from pydantic import BaseModel, ConfigDict, Field, StringConstraints

SLUG_PATTERN = r"^[a-z][a-z0-9]*(-[a-z0-9]+)*$"
SLUG_LENGTH = 40
SLUG_WORDS = f"lower-case letters, digits and single hyphens, a letter first, at most {SLUG_LENGTH} characters"
ANIMAL_PATTERN = r"^[a-z][a-z0-9]*(-[a-z0-9]+)*/[a-z0-9]+(-[a-z0-9]+)*$"
ANIMAL_WORDS = "genus-species/stage in lower case, such as penaeus-vannamei/pl10"

Slug = Annotated[str, StringConstraints(pattern=SLUG_PATTERN, max_length=SLUG_LENGTH)]
Animal = Annotated[str, StringConstraints(pattern=ANIMAL_PATTERN, max_length=120)]
Words = Annotated[str, StringConstraints(min_length=1, max_length=200, strip_whitespace=True)]


class Section(BaseModel):
    """A section of the site file. The description of each field says what is allowed there."""

    model_config = ConfigDict(extra="forbid", frozen=True, allow_inf_nan=False, populate_by_name=True)


def slug(what: str, default: Any = ...) -> Any:
    """Return the field of an id or of a reference to one; *what* names the thing."""
    return Field(default, description=f"{what}: {SLUG_WORDS}")


def words(what: str, default: Any = ...) -> Any:
    """Return the field of a text that people read; *what* names it."""
    return Field(default, description=f"{what}: a text of 1 to 200 characters (in quotes if it looks like a number)")


def quantity(low: float, high: float, unit: str = "", default: Any = ...) -> Any:
    """Return the field of a number from *low* to *high*, with its unit."""
    tail = f" [{unit}]" if unit else ""
    return Field(default, ge=low, le=high, description=f"a number from {low:.10g} to {high:.10g}{tail}")


def whole(low: int, high: int, default: Any = ...) -> Any:
    """Return the field of a whole number from *low* to *high*."""
    return Field(default, ge=low, le=high, description=f"a whole number from {low} to {high}")


def positive(high: float, unit: str = "", default: Any = ...) -> Any:
    """Return the field of a number above 0, up to *high*, with its unit."""
    tail = f" [{unit}]" if unit else ""
    return Field(default, gt=0, le=high, description=f"a number above 0, up to {high:.10g}{tail}")


def one_of(*allowed: str, default: Any = ...) -> Any:
    """Return the field of a choice; the type of the attribute holds the same words."""
    return Field(default, description="one of: " + ", ".join(allowed))


def optional_pair(what: str, unit: str) -> Any:
    """Return the field of a [low, high] pair that may be left out."""
    return Field(None, description=f"[low, high]: two numbers with decimal points, low below high: {what} [{unit}]")
