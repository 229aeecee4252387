"""Pages of tests, standards, schedule and drift, and pages that mix them with the register."""

from __future__ import annotations

from django.urls import URLPattern, URLResolver, path

from calibration.views import guidance, point_lists, standards
from register.access import needs

urlpatterns: list[URLPattern | URLResolver] = [
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
]
