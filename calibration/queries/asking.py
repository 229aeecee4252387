"""What a person asked a list of tags for."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, fields, replace
from typing import Final
from urllib.parse import urlencode

#: Columns that a list is sorted by; each is led in by an index and ends in the key of the row.
ORDERS: Final[dict[str, tuple[str, ...]]] = {
    "tag": ("sort_key", "tag_id"),
    "area": ("area_code", "sort_key", "tag_id"),
    "due": ("due_key", "sort_key", "tag_id"),
    "error": ("error_rank", "sort_key", "tag_id"),
    "flag": ("flag_rank", "sort_key", "tag_id"),
}
FLAGS: Final[dict[str, int]] = {"violation": 0, "caution": 1, "cannot check": 2, "none": 3}
NO_TEST: Final = "none"


@dataclass(frozen=True, slots=True)
class Asked:
    """What a person asked a list for; every part stands in the address."""

    plant: str = ""
    area: str = ""
    service: str = ""
    flag: str = ""
    state: str = ""
    verdict: str = ""
    criticality: str = ""
    text: str = ""
    sort: str = "tag"
    after: str = ""
    before: str = ""

    @classmethod
    def read(cls, given: Mapping[str, str], known: Mapping[str, Sequence[str]], *, sort: str = "tag") -> Asked:
        """Read an address; what is not among the `known` values of a filter is left out."""
        chosen = {name: given.get(name, "") for name, values in known.items() if given.get(name, "") in values}
        order = given.get("sort", "")
        return cls(
            **chosen,
            plant=given.get("plant", ""),
            text=given.get("text", "").replace("\0", "").strip()[:100],
            sort=order if order.removeprefix("-") in ORDERS else sort,
            after=given.get("after", ""),
            before=given.get("before", ""),
        )

    def address(self, **changes: str) -> str:
        """The query part of the address with some parts changed; a new filter or sort starts at the first page."""
        if not {"after", "before"} & set(changes):
            changes |= {"after": "", "before": ""}
        return "?" + urlencode(replace(self, **changes).parts)

    @property
    def parts(self) -> dict[str, str]:
        """The parts that are set, by their names in the address."""
        return {name: value for name in _PARTS if (value := getattr(self, name))}

    @property
    def order(self) -> tuple[str, ...]:
        return ORDERS[self.sort.removeprefix("-")]

    @property
    def descending(self) -> bool:
        return self.sort.startswith("-")


_PARTS: Final = tuple(part.name for part in fields(Asked))
