"""Root urls: the register's pages, then those of calibration, named as a string so that the arrow stays one-way."""

from __future__ import annotations

from django.urls import include, path

from register.access import needs
from register.imports.steps import steps
from register.views import (
    audit,
    catalogue,
    finding,
    fittings,
    flags,
    import_register,
    interventions,
    people,
    plants,
    ranges,
    tags,
    transmitters,
)
from register.views.home import choose_plant, home
from register.views.signing_in import first_administrator, password, sign_in, sign_out

urlpatterns = [
    path("", needs("signed in")(home), name="home"),
    path("sign-in/", needs("public")(sign_in), name="sign-in"),
    path("sign-out/", needs("signed in")(sign_out), name="sign-out"),
    path("password/", needs("signed in")(password), name="password"),
    path("first-administrator/", needs("public")(first_administrator), name="first-administrator"),
    path("people/", needs("manage people")(people.people), name="people"),
    path("people/new/", needs("manage people")(people.new), name="person-new"),
    path("people/join/", needs("manage people")(people.join), name="person-join"),
    path("people/<int:pk>/", needs("manage people")(people.person), name="person"),
    path("people/<int:pk>/edit/", needs("manage people")(people.edit), name="person-edit"),
    path("people/<int:pk>/roles/<slug:code>/", needs("manage people")(people.roles), name="person-roles"),
    path("people/<int:pk>/password/", needs("manage people")(people.password), name="person-password"),
    path("people/<int:pk>/deactivate/", needs("manage people")(people.deactivate), name="person-deactivate"),
    path("people/<int:pk>/reactivate/", needs("manage people")(people.reactivate), name="person-reactivate"),
    path("people/<int:pk>/unlock/", needs("manage people")(people.unlock), name="person-unlock"),
    path("audit/", needs("read")(audit.audit), name="audit"),
    path("audit/export/", needs("read")(audit.export), name="audit-export"),
    path("audit/<uuid:pk>/", needs("read")(audit.act), name="audit-act"),
    path("find/", needs("read")(finding.finding), name="find"),
    path("plants/", needs("read")(plants.plants), name="plants"),
    path("plants/new/", needs("manage plant")(plants.plant_new), name="plant-new"),
    path("plants/<slug:code>/edit/", needs("manage plant")(plants.plant_edit), name="plant-edit"),
    path("areas/new/", needs("edit register")(plants.area_new), name="area-new"),
    path("areas/<int:pk>/edit/", needs("edit register")(plants.area_edit), name="area-edit"),
    path("makers/", needs("read")(catalogue.makers), name="makers"),
    path("makers/new/", needs("edit catalogue")(catalogue.maker_new), name="maker-new"),
    path("makers/<int:pk>/edit/", needs("edit catalogue")(catalogue.maker_edit), name="maker-edit"),
    path("types/", needs("read")(catalogue.types), name="types"),
    path("types/new/", needs("edit catalogue")(catalogue.type_new), name="type-new"),
    path("types/<int:pk>/", needs("read")(catalogue.type_), name="type"),
    path("types/<int:pk>/edit/", needs("edit catalogue")(catalogue.type_edit), name="type-edit"),
    path("types/<int:pk>/heads/new/", needs("edit catalogue")(catalogue.head_new), name="head-new"),
    path("heads/<int:pk>/", needs("read")(catalogue.head), name="head"),
    path("heads/<int:pk>/edit/", needs("edit catalogue")(catalogue.head_edit), name="head-edit"),
    path("tags/new/", needs("edit register")(tags.tag_new), name="tag-new"),
    path("tags/<int:pk>/edit/", needs("edit register")(tags.tag_edit), name="tag-edit"),
    path("tags/<int:pk>/service/", needs("edit register")(tags.tag_out_of_service), name="tag-out-of-service"),
    path("tags/<int:pk>/fit/", needs("fit")(fittings.tag_fit), name="tag-fit"),
    path("tags/<int:pk>/remove/", needs("fit")(fittings.tag_remove), name="tag-remove"),
    path("tags/<int:pk>/swap/", needs("fit")(fittings.tag_swap), name="tag-swap"),
    path("tags/<int:pk>/range/", needs("re-range")(ranges.tag_range), name="tag-range"),
    path("ranges/<int:pk>/withdraw/", needs("re-range")(ranges.range_withdraw), name="range-withdraw"),
    path("flags/<int:pk>/accept/", needs("accept flag")(flags.flag_accept), name="flag-accept"),
    path("flags/<int:pk>/withdraw/", needs("accept flag")(flags.flag_withdraw), name="flag-withdraw"),
    path("transmitters/", needs("read")(transmitters.transmitters), name="transmitters"),
    path("transmitters/new/", needs("edit register")(transmitters.transmitter_new), name="transmitter-new"),
    path("transmitters/<int:pk>/edit/", needs("edit register")(transmitters.transmitter_edit), name="transmitter-edit"),
    path("transmitters/<int:pk>/move/", needs("fit")(transmitters.transmitter_move), name="transmitter-move"),
    path(
        "transmitters/<int:pk>/head/", needs("edit register")(interventions.transmitter_head), name="transmitter-head"
    ),
    path(
        "transmitters/<int:pk>/interventions/new/",
        needs("fit")(interventions.intervention_new),
        name="intervention-new",
    ),
    path(
        "interventions/<int:pk>/withdraw/",
        needs("edit register")(interventions.intervention_withdraw),
        name="intervention-withdraw",
    ),
    *steps(import_register.REGISTER),
    path("import/register/export/", needs("read")(import_register.take_out), name="import-register-export"),
    path("plants/<slug:code>/choose/", needs("signed in")(choose_plant), name="plant-choose"),
    path("", include("calibration.urls")),
]
