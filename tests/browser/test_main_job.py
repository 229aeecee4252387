"""The main job of the site from a bare start to the drift chart, by everybody who has a part in it."""

from __future__ import annotations

import pytest

from tests.browser import job_after as after
from tests.browser import job_office as office
from tests.browser import job_sheet as sheet
from tests.browser.hands import Crew
from tests.browser.site import Site

pytestmark = pytest.mark.browser
SITE = "empty_site"


def test_the_main_job_runs_from_a_bare_start_to_the_drift_chart(crew: Crew, empty_site: Site) -> None:
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
    office.past_tests_are_brought_in(engineer)

    technician = office.signs_in_for_the_first_time(crew, "tam", size="lying", theme="outdoor")
    sheet.a_sheet_is_opened_from_the_due_list(technician)
    sheet.the_wrong_instrument_is_refused(technician)
    sheet.every_caution_is_answered(technician)
    sheet.a_lapsed_standard_is_refused(technician)
    sheet.readings_are_judged_as_they_are_typed(technician)
    second = office.signs_in_for_the_first_time(crew, "jo", size="upright")
    sheet.two_people_see_both_versions(technician, second)
    sheet.as_found_is_closed_before_adjustment_opens(technician)
    sheet.it_is_adjusted_and_read_again(technician)
    sheet.it_goes_back_into_service(technician)
    sheet.it_is_signed_with_the_password(technician)
    address = technician.page.url.removeprefix(empty_site.url)

    after.the_test_shows_plot_figures_and_verdict(technician)
    after.the_due_date_has_moved(planner)
    after.the_record_is_reviewed(office.signs_in_for_the_first_time(crew, "reviewer"))
    auditor = office.signs_in_for_the_first_time(crew, "auditor")
    after.the_auditor_walks_from_drift_to_certificate(auditor)
    after.the_auditor_reads_what_was_changed(auditor)
    after.a_stranger_finds_nothing(office.signs_in_for_the_first_time(crew, "stranger"), address)

    for hand in crew.hands:
        assert not hand.problems, f"{hand.name}: " + "\n".join(hand.problems)
    assert "Every hash and every verdict agrees." in empty_site.manage("verify_records")
    assert "What is kept agrees with the history." in empty_site.manage("recompute", "--check")
