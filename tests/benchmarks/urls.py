"""The addresses of the site and that of the bare page, which the lists are measured against."""

from django.http import HttpRequest, HttpResponse
from django.shortcuts import render
from django.urls import include, path

from register.access import needs


def bare(request: HttpRequest) -> HttpResponse:
    """Session, person, masthead: what every page costs before it shows anything."""
    return render(request, "benchmarks/bare.html")


urlpatterns = [path("bare/", needs("read")(bare), name="bare"), path("", include("register.urls"))]
