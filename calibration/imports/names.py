"""Tags and transmitters that a file names, found in the register."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, field
from typing import Final

from register.imports.cells import unknown
from register.models import Plant, Tag
from register.searching import SearchKey, key

AT_ONCE: Final = 1000
#: Names that are spelt much alike are offered in plants up to this size, and for so many unknown ones.
MOST_NAMES: Final = 5000
MOST_OFFERS: Final = 20


@dataclass(slots=True)
class Tags:
    """Tags of a plant by the keys of their numbers, with plant, range and fitting at hand."""

    plant: Plant
    rows: dict[str, Tag]
    _offers: int = 0
    _names: list[str] = field(default_factory=list)

    @classmethod
    def named(cls, plant: Plant, numbers: Iterable[str]) -> Tags:
        """Find the tags with these numbers."""
        keys = sorted({key(number) for number in numbers})
        rows: dict[str, Tag] = {}
        for start in range(0, len(keys), AT_ONCE):
            found = Tag.objects.filter(plant=plant).alias(_key=SearchKey("number"))
            for tag in found.filter(_key__in=keys[start : start + AT_ONCE]).select_related(
                "area", "current_range", "current_fitting"
            ):
                tag.plant = plant
                rows[key(tag.number)] = tag
        return cls(plant, rows)

    def unknown(self, number: str) -> str:
        """Say that no tag has this number, and which have one much like it."""
        self._offers += 1
        if self._offers == 1:
            self._names = list(Tag.objects.filter(plant=self.plant).values_list("number", flat=True)[: MOST_NAMES + 1])
        names = self._names if len(self._names) <= MOST_NAMES and self._offers <= MOST_OFFERS else []
        return unknown("tag", number, names, f"in {self.plant}")
