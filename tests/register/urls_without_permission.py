"""One view that nobody gave a permission."""

from django.http import HttpRequest, HttpResponse
from django.urls import include, path


def bare(request: HttpRequest) -> HttpResponse:
    return HttpResponse("seen by all")


urlpatterns = [path("open/", bare), path("", include("register.urls"))]
