"""Values kept as a person typed them, with the SI figure that checks and sorts use beside them."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

from django.db import models


@dataclass(frozen=True, slots=True)
class Typed:
    """Names the three columns of one typed value: its text, its unit, its figure in SI."""

    text: str
    unit: str
    si: str


class TypedQuantities(models.Model):
    """A row with typed values; `set_si` is called by the acts before a row is stored."""

    QUANTITIES: ClassVar[tuple[Typed, ...]] = ()

    class Meta:
        abstract = True

    def set_si(self) -> None:
        """Fill every SI column from the text and unit beside it; an empty text gives None.

        Raises
        ------
        ValueError
            A text is not a number, or its unit is unknown.
        """
        from register.engineering.typed import parse_number
        from register.engineering.units import to_si

        for quantity in self.QUANTITIES:
            text = str(getattr(self, quantity.text)).strip()
            value = None if not text else float(to_si(parse_number(text), getattr(self, quantity.unit)))
            setattr(self, quantity.si, value)


def in_words(unit: str) -> str:
    """The label of a unit's key; a key that is not known stays as it is."""
    from register.engineering.units import UNITS

    return UNITS[unit].label if unit in UNITS else unit


def as_shown(number: str) -> str:
    """A typed number with a true minus sign."""
    return number.replace("-", "\N{MINUS SIGN}")


class Frozen(models.Model):
    """A row that is inserted once and never again changed or deleted.

    The database itself refuses UPDATE, DELETE and TRUNCATE (`register.guards`); this class makes the
    refusal early and readable.
    """

    class Meta:
        abstract = True

    def save(self, *args: object, **kwargs: object) -> None:
        if not self._state.adding:
            raise TypeError(f"{self._meta.verbose_name} {self.pk} is frozen and cannot be changed")
        super().save(*args, **kwargs)  # type: ignore[arg-type]

    def delete(self, *args: object, **kwargs: object) -> tuple[int, dict[str, int]]:
        raise TypeError(f"{self._meta.verbose_name} {self.pk} is frozen and cannot be deleted")


class ReferenceKind(models.TextChoices):
    """What a pressure is measured against."""

    GAUGE = "gauge", "gauge"
    ABSOLUTE = "absolute", "absolute"
    DIFFERENTIAL = "differential", "differential"
