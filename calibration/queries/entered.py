"""What people entered in a sheet, in words: ids and keys are called by their names."""

from __future__ import annotations

import re
from functools import cached_property
from typing import Final

from calibration.models import Certificate, Entry, Standard
from calibration.sheet_fields import PRESENT, label
from register.engineering.units import LENGTH, PRESSURE, TEMPERATURE, choices

_LAST_WORD: Final = re.compile(r"[^-.]+$")


class Names:
    """What the ids and keys in the entries of one plant are called; looked up only if any is met."""

    def __init__(self, plant_id: int) -> None:
        self.plant_id = plant_id

    @cached_property
    def _standards(self) -> dict[str, str]:
        return {str(pk): name for pk, name in Standard.objects.filter(plant=self.plant_id).values_list("pk", "name")}

    @cached_property
    def _certificates(self) -> dict[str, str]:
        rows = Certificate.objects.filter(standard__plant=self.plant_id).values_list("pk", "number")
        return {str(pk): number for pk, number in rows}

    @cached_property
    def _units(self) -> dict[str, str]:
        return dict(choices(PRESSURE, TEMPERATURE, LENGTH))

    def text(self, entry: Entry) -> str:
        """The text of an entry as its page shows it."""
        found = _LAST_WORD.search(entry.field)
        kind = found[0] if found else ""
        if kind == "with":
            return self._standards.get(entry.text, entry.text)
        if kind == "certificate":
            return self._certificates.get(entry.text, entry.text)
        if kind == "unit":
            return self._units.get(entry.text, entry.text)
        return entry.text

    def deed(self, entry: Entry) -> str:
        """What somebody did with an entry, to stand after his name."""
        if entry.field == PRESENT:
            return "opened it"
        if not entry.text:
            return f"emptied {label(entry.field)}"
        return f"typed “{self.text(entry)}” at {label(entry.field)}"
