"""Pages of tests, standards, schedule and drift, and pages that mix them with the register."""

from __future__ import annotations

from django.urls import URLPattern, URLResolver, path

from calibration.views import (
    due_list,
    finished,
    guidance,
    import_requirements,
    import_tests,
    lists_of_tests,
    point_lists,
    register_list,
    requirements,
    sheet,
    sheet_ends,
    sheet_entries,
    sheet_opening,
    standards,
    tag,
    transmitter,
)
from register.access import needs
from register.imports.steps import steps

urlpatterns: list[URLPattern | URLResolver] = [
    path("register/", needs("read")(register_list.register_list), name="register"),
    path("register/export/", needs("read")(register_list.register_export), name="register-export"),
    path("due/", needs("read")(due_list.due_list), name="due-list"),
    path("due/export/", needs("read")(due_list.due_export), name="due-export"),
    path("tags/<int:pk>/", needs("read")(tag.tag), name="tag"),
    path("tags/<int:pk>/drift/export/", needs("read")(tag.tag_drift_export), name="tag-drift-export"),
    path("tags/<int:pk>/requirement/", needs("set requirement")(requirements.tag_requirement), name="tag-requirement"),
    path(
        "requirements/<int:pk>/withdraw/",
        needs("set requirement")(requirements.requirement_withdraw),
        name="requirement-withdraw",
    ),
    path("tags/<int:pk>/defer/", needs("plan")(requirements.tag_defer), name="tag-defer"),
    path(
        "deferrals/<int:pk>/approve/",
        needs("approve deferral")(requirements.deferral_approve),
        name="deferral-approve",
    ),
    path(
        "deferrals/<int:pk>/withdraw/",
        needs("withdraw deferral")(requirements.deferral_withdraw),
        name="deferral-withdraw",
    ),
    path("transmitters/<int:pk>/", needs("read")(transmitter.transmitter), name="transmitter"),
    path(
        "transmitters/<int:pk>/drift/export/",
        needs("read")(transmitter.transmitter_drift_export),
        name="transmitter-drift-export",
    ),
    path("standards/", needs("read")(standards.standards), name="standards"),
    path("standards/new/", needs("edit standards")(standards.standard_new), name="standard-new"),
    path("standards/<int:pk>/", needs("read")(standards.standard), name="standard"),
    path("standards/<int:pk>/edit/", needs("edit standards")(standards.standard_edit), name="standard-edit"),
    path(
        "standards/<int:pk>/certificates/new/",
        needs("edit standards")(standards.certificate_new),
        name="certificate-new",
    ),
    path(
        "certificates/<int:pk>/withdraw/",
        needs("edit standards")(standards.certificate_withdraw),
        name="certificate-withdraw",
    ),
    path("point-lists/", needs("read")(point_lists.point_lists), name="point-lists"),
    path("point-lists/new/", needs("set requirement")(point_lists.point_list_new), name="point-list-new"),
    path("point-lists/<int:pk>/edit/", needs("set requirement")(point_lists.point_list_edit), name="point-list-edit"),
    path(
        "point-lists/<int:pk>/withdraw/",
        needs("set requirement")(point_lists.point_list_withdraw),
        name="point-list-withdraw",
    ),
    path("guidance/", needs("read")(guidance.guidance), name="guidance"),
    path("guidance/new/", needs("edit guidance")(guidance.guidance_new), name="guidance-new"),
    path("guidance/<int:pk>/edit/", needs("edit guidance")(guidance.guidance_edit), name="guidance-edit"),
    path("guidance/<int:pk>/withdraw/", needs("edit guidance")(guidance.guidance_withdraw), name="guidance-withdraw"),
    path("tags/<int:pk>/test/", needs("test")(sheet_opening.sheet_open), name="sheet-open"),
    path("transmitters/<int:pk>/test/", needs("test")(sheet_opening.sheet_bench), name="sheet-bench"),
    path("tests/<int:pk>/correct/", needs("test")(sheet_opening.sheet_correct), name="sheet-correct"),
    path("sheets/", needs("read")(lists_of_tests.sheets), name="sheets"),
    path("sheets/<uuid:pk>/", needs("read")(sheet.sheet), name="sheet"),
    path("sheets/<uuid:pk>/entries/", needs("read")(sheet_entries.sheet_entries), name="sheet-entries"),
    path("sheets/<uuid:pk>/judge/", needs("read")(sheet_entries.sheet_judge), name="sheet-judge"),
    path("sheets/<uuid:pk>/news/", needs("read")(sheet_entries.sheet_news), name="sheet-news"),
    path("sheets/<uuid:pk>/settle/", needs("test")(sheet_ends.sheet_settle), name="sheet-settle"),
    path("sheets/<uuid:pk>/sign/", needs("test")(sheet.sign), name="sheet-sign"),
    path("sheets/<uuid:pk>/steps/<slug:name>/", needs("test")(sheet.step), name="sheet-step"),
    path(
        "sheets/<uuid:pk>/could-not-test/",
        needs("test")(sheet_ends.sheet_could_not_test),
        name="sheet-could-not-test",
    ),
    path("sheets/<uuid:pk>/abandon/", needs("test")(sheet_ends.sheet_abandon), name="sheet-abandon"),
    path(
        "sheets/<uuid:pk>/exceptions/<int:standard>/",
        needs("read")(sheet_ends.sheet_exception),
        name="sheet-exception",
    ),
    path("tests/", needs("read")(lists_of_tests.tests), name="tests"),
    path("tests/<int:pk>/", needs("read")(finished.test), name="test"),
    path("tests/<int:pk>/readings.csv", needs("read")(finished.test_readings), name="test-readings"),
    path("tests/<int:pk>/review/", needs("review")(finished.test_review), name="test-review"),
    path("tests/<int:pk>/send-back/", needs("review")(finished.test_send_back), name="test-send-back"),
    *steps(import_requirements.REQUIREMENTS),
    *steps(import_tests.TESTS),
]
