"""A tag that is ready for a test, in the plant of the cast."""

from __future__ import annotations

import pytest

from calibration.provision import provide_defaults
from register.auditing import Actor
from tests import cast as people
from tests.calibration.at_work import Device, opened


@pytest.fixture
def tag(cast: people.Cast) -> people.Tag:
    """PT-100: 0 to 10 bar, 0.5 % of span, nine points, a fitted transmitter; the plant has its defaults."""
    provide_defaults(by=Actor(person=None), plant=cast.plant)
    return people.make_ready_tag(people.make_area(cast.plant, "20"), "PT-100")


@pytest.fixture
def tablet(tag: people.Tag, cast: people.Cast) -> Device:
    """The technician's tablet with a sheet of PT-100 open."""
    return opened(tag, cast.technician)
