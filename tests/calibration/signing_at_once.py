"""Signs records from several processes at once on the database that the settings name; run by a test."""

from __future__ import annotations

import sys


def prepare(workers: int) -> None:
    from django.core.management import call_command

    call_command("migrate", verbosity=0, run_syncdb=True)
    from tests import cast as people

    cast = people.make_cast()
    area = people.make_area(cast.plant)
    for number in range(workers):
        people.make_ready_tag(area, f"PT-{number}")


def work(worker: int, count: int) -> None:
    from django.db import transaction

    from calibration.recording import write_record
    from register.auditing import Act, Actor
    from register.models import Tag, User
    from tests.calibration.described import described

    tag = Tag.objects.select_related("plant", "current_range", "current_fitting__transmitter__head").get(
        number=f"PT-{worker}"
    )
    signer = User.objects.get(username="technician")
    for _ in range(count):
        act = Act(by=Actor(person=signer), reason="at once")
        with transaction.atomic():
            write_record(described(tag, signer=signer), act=act)
            act.write()


if __name__ == "__main__":
    import django

    django.setup()
    if sys.argv[1] == "prepare":
        prepare(int(sys.argv[2]))
    else:
        work(int(sys.argv[2]), int(sys.argv[3]))
