"""The main job of the site from a bare start to the drift chart, by everybody who has a part in it."""

from __future__ import annotations

import pytest

from tests.browser import job_office as office
from tests.browser.hands import Crew

pytestmark = pytest.mark.browser
SITE = "empty_site"


def test_the_main_job_runs_from_a_bare_start_to_the_drift_chart(crew: Crew) -> None:
    administrator = office.the_first_administrator_opens_the_plant(crew)
    office.an_area_is_made(administrator)
    office.people_get_their_roles(administrator)

    engineer = office.signs_in_for_the_first_time(crew, "engineer")
    office.maker_type_and_head_are_written_down(engineer)
    office.the_register_is_brought_in(engineer)
    office.the_same_file_changes_nothing(engineer)
    office.a_range_above_its_head_is_told_with_its_arithmetic(engineer)
    office.one_flag_is_accepted_with_reason_and_end(engineer)
    office.the_other_is_ranged_anew(engineer)
    planner = office.signs_in_for_the_first_time(crew, "planner")
    office.standards_get_their_certificates(planner)
    office.a_requirement_is_set(engineer)
