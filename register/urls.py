"""Root urls: the register's pages, then those of calibration, named as a string so that the arrow stays one-way."""

from __future__ import annotations

from django.urls import include, path

from register.access import needs
from register.views.home import choose_plant, home
from register.views.signing_in import password, sign_in, sign_out

urlpatterns = [
    path("", needs("signed in")(home), name="home"),
    path("sign-in/", needs("public")(sign_in), name="sign-in"),
    path("sign-out/", needs("signed in")(sign_out), name="sign-out"),
    path("password/", needs("signed in")(password), name="password"),
    path("plants/<slug:code>/choose/", needs("signed in")(choose_plant), name="plant-choose"),
    path("", include("calibration.urls")),
]
