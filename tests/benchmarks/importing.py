"""Times the import of a register against the storing of the same rows by `bulk_create`, each in a process of its own.

Run as a module it is one of the two: `import` brings a file into an empty plant and keeps what it stored in a file
beside the database, `create` stores just that in another database.
"""

from __future__ import annotations

import argparse
import csv
import io
import json
import pickle
import time
from collections.abc import Callable, Iterator, Mapping
from pathlib import Path
from typing import Any, Final

import django

from tests.benchmarks import processes
from tests.benchmarks.report import Aim, Table, megabytes, seconds, times

AIM: Final = 4.0


def compare(rows: int, imported: Mapping[str, str], created: Mapping[str, str], folder: Path) -> Table:
    """Import so many rows into one database, store the same in the other.

    Parameters
    ----------
    imported, created : mapping
        Environments of two sites that do not exist yet.
    """
    kept = str(folder / "imported.pickle")
    command = ("-m", "tests.benchmarks.importing", "--rows", str(rows))
    told = json.loads(processes.run(*command, "import", kept, told=imported).splitlines()[-1])
    plain = json.loads(processes.run(*command, "create", kept, told=created).splitlines()[-1])
    table = Table(f"Import of {rows:,} rows", ["what", "rows stored", "time", "ratio", "peak memory"])
    brought, named, all_of_them = told["apply"], plain["named"], plain["all"]
    everything = f"{plain['stored']:,}"
    most = [megabytes(found["memory"]) for found in (plain, told)]
    table.rows = [
        ["bulk_create of the tags, transmitters, fittings, ranges", f"{plain['register']:,}", seconds(named), "", ""],
        ["bulk_create of all that the import stored", everything, seconds(all_of_them), "", most[0]],
        ["dry run: file read, checked, told", "", seconds(told["dry run"]), times(told["dry run"] / named), ""],
        ["import: file read, checked, stored", everything, seconds(brought), times(brought / named), most[1]],
    ]
    table.remarks.append(
        "An import stores, besides the four kinds of rows that the file names, their flags, standings, search words "
        f"and entries in the trail; against all of that by bulk_create it takes {times(brought / all_of_them)}. "
        "bulk_create is given finished objects, in one transaction."
    )
    table.aims.append(Aim(f"Import of {rows:,} rows against bulk_create of the same rows", brought / named, AIM))
    return table


def main() -> None:
    parser = argparse.ArgumentParser()
    parser.add_argument("what", choices=["import", "create"])
    parser.add_argument("kept", type=Path)
    parser.add_argument("--rows", type=int, required=True)
    chosen = parser.parse_args()
    django.setup()
    _empty_plant()
    found = _import(chosen.rows, chosen.kept) if chosen.what == "import" else _create(chosen.kept)
    print(json.dumps(found | {"memory": processes.peak_memory()}))


def _empty_plant() -> None:
    """A plant with areas, two measuring heads and an engineer, the same in both databases."""
    from tests.benchmarks import invented
    from tests.benchmarks.building import new_plant

    new_plant()
    invented.heads()


def _import(rows: int, kept: Path) -> dict[str, float]:
    from register.auditing import Actor
    from register.importing import import_register
    from register.imports.columns import guessed
    from register.imports.proposing import propose
    from register.imports.sheet import COLUMNS
    from register.imports.tables import read_table
    from register.models import Plant, User

    plant, engineer = Plant.objects.get(code="bench"), User.objects.get(username="engineer")
    data, before = _file(rows), {model: _last(model) for model in _models()}
    start = time.perf_counter()
    table = read_table(data, "register.csv")
    matching = guessed(table.head, COLUMNS)
    proposal = propose(plant=plant, table=table, matching=matching, today=plant.today())
    if proposal.complaints:
        raise ValueError(str(proposal.complaints[0]))
    seen = proposal.digest()
    del proposal
    checked = time.perf_counter()
    again = read_table(data, "register.csv")
    import_register(by=Actor(engineer), reason="benchmark", plant=plant, table=again, matching=matching, seen=seen)
    applied = time.perf_counter()
    with kept.open("wb") as file:
        stored = [list(model._default_manager.filter(pk__gt=last)) for model, last in before.items()]
        pickle.dump(stored, file)
    return {"dry run": checked - start, "apply": applied - checked}


def _create(kept: Path) -> dict[str, float]:
    with kept.open("rb") as file:
        stored = pickle.load(file)
    named = len(_named())
    return {
        "named": _timed(lambda: _store(stored[:named]), take_back=True),
        "all": _timed(lambda: _store(stored)),
        "register": sum(map(len, stored[:named])),
        "stored": sum(map(len, stored)),
    }


def _store(stored: list[list[Any]]) -> None:
    for rows in stored:
        if rows:
            type(rows[0])._default_manager.bulk_create(rows)


def _timed(work: Callable[[], None], *, take_back: bool = False) -> float:
    from django.db import transaction

    start = time.perf_counter()
    with transaction.atomic():
        work()
        spent = time.perf_counter() - start
        transaction.set_rollback(take_back)
    return spent if take_back else time.perf_counter() - start


def _named() -> tuple[Any, ...]:
    """Models whose rows a file of tags names."""
    from register.models import Fitting, Range, Tag, Transmitter

    return Tag, Transmitter, Fitting, Range


def _models() -> Iterator[Any]:
    """Those, and what follows from them."""
    from calibration.models import SearchWord, Standing
    from register.models import AuditEntry, Flag

    yield from (*_named(), Flag, AuditEntry, Standing, SearchWord)


def _last(model: Any) -> int:
    from django.db.models import Max

    return int(model._default_manager.aggregate(last=Max("pk"))["last"] or 0)


def _file(rows: int) -> bytes:
    """A register of so many tags, each with range and transmitter, as a person would export it."""
    from tests.benchmarks.invented import KINDS, Plan, heads

    plan, fitted = Plan.of(rows), heads()
    text = io.StringIO()
    written = csv.writer(text)
    written.writerow(HEAD)
    for place in range(rows):
        _, prefix, tag, span, head_of = KINDS[plan.kind[place]]
        head = fitted[head_of]
        written.writerow(
            [
                f"{prefix}-{place:06d}",
                plan.services[place],
                f"{plan.area[place] + 1}00",
                tag.get("measurand", "pressure"),
                plan.criticality[place],
                "bar",
                "gauge",
                tag.get("operating_pressure", "6"),
                tag.get("design_pressure", "10"),
                "0.5",
                "°C",
                "20",
                tag.get("process_max", "60"),
                "24",
                "250",
                tag.get("root_extraction", ""),
                span["lrv"],
                span["urv"],
                span["unit"],
                span.get("transfer", "linear"),
                head.type.maker.name,
                head.type.designation,
                head.code,
                f"Q{place:07d}",
                "2024-05-06",
            ]
        )
    return text.getvalue().encode()


HEAD: Final = (
    "tag",
    "service",
    "area",
    "measurand",
    "criticality",
    "pressure_unit",
    "pressure_reference",
    "operating pressure",
    "design pressure",
    "lowest pressure",
    "temperature_unit",
    "lowest process temperature",
    "highest process temperature",
    "supply voltage",
    "loop_ohm",
    "root_extraction",
    "lrv",
    "urv",
    "range_unit",
    "transfer",
    "maker",
    "type",
    "head",
    "serial",
    "fitted_on",
)


if __name__ == "__main__":
    main()
