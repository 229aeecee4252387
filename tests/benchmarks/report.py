"""What a section of the benchmarks found, and how it is printed: every figure, its aim, met or missed."""

from __future__ import annotations

import json
from collections.abc import Iterable, Sequence
from dataclasses import asdict, dataclass, field

UNKNOWN = "–"


@dataclass(frozen=True, slots=True)
class Aim:
    """A ratio and what it should stay at or below."""

    what: str
    ratio: float
    limit: float

    @property
    def met(self) -> bool:
        return self.ratio <= self.limit

    def __str__(self) -> str:
        verdict = "met" if self.met else "MISSED"
        return f"{self.what}: {self.ratio:.2f} × (aim: at most {self.limit:g} ×) {verdict}"


@dataclass(slots=True)
class Table:
    """One section: rows of ready texts under heads, remarks below, ratios that have an aim."""

    title: str
    heads: list[str]
    rows: list[list[str]] = field(default_factory=list)
    remarks: list[str] = field(default_factory=list)
    aims: list[Aim] = field(default_factory=list)

    def __str__(self) -> str:
        lines = [self.title, "-" * len(self.title), *_aligned([self.heads, *self.rows])]
        lines += [f"  {remark}" for remark in self.remarks]
        lines += [f"  → {aim}" for aim in self.aims]
        return "\n".join(lines)

    def written(self) -> str:
        """As one line for the process that prints it."""
        return json.dumps(asdict(self))

    @classmethod
    def read(cls, text: str) -> Table:
        kept = json.loads(text)
        return cls(**kept | {"aims": [Aim(**aim) for aim in kept["aims"]]})


def milliseconds(seconds: float) -> str:
    return f"{seconds * 1000:.2f} ms"


def seconds(value: float) -> str:
    return f"{value:.2f} s"


def megabytes(count: int | None) -> str:
    """Bytes in MiB; None where the machine does not tell."""
    return UNKNOWN if count is None else f"{count / 2**20:,.0f} MiB"


def times(ratio: float | None) -> str:
    return UNKNOWN if ratio is None else f"{ratio:.2f} ×"


def _aligned(rows: Sequence[Sequence[str]]) -> Iterable[str]:
    widths = [max(len(row[column]) for row in rows) for column in range(len(rows[0]))]
    for row in rows:
        cells = [cell.ljust(widths[0]) if place == 0 else cell.rjust(widths[place]) for place, cell in enumerate(row)]
        yield "  " + "  ".join(cells).rstrip()
