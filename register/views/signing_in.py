"""Signing in and out, and changing one's own password."""

from __future__ import annotations

from django.conf import settings
from django.contrib import messages
from django.contrib.auth import login, logout, update_session_auth_hash
from django.contrib.auth.forms import AuthenticationForm, PasswordChangeForm
from django.http import HttpRequest, HttpResponse, HttpResponseRedirect
from django.shortcuts import redirect, render, resolve_url
from django.utils.http import url_has_allowed_host_and_scheme
from django.views.decorators.cache import never_cache
from django.views.decorators.debug import sensitive_post_parameters
from django.views.decorators.http import require_http_methods, require_POST

from register import membership
from register.auditing import Actor
from register.models import User


@sensitive_post_parameters("password")
@never_cache
@require_http_methods(["GET", "POST"])
def sign_in(request: HttpRequest) -> HttpResponse:
    """Ask for name and password; afterwards go to where the person was heading."""
    heading = onward(request)
    if request.user.is_authenticated:
        return HttpResponseRedirect(heading)
    form = AuthenticationForm(request, data=request.POST or None)
    if request.method == "POST" and form.is_valid():
        login(request, form.get_user())
        return HttpResponseRedirect(heading)
    context = {"form": form, "next": request.POST.get("next", request.GET.get("next", ""))}
    return render(request, "register/sign_in.html", context)


@require_POST
def sign_out(request: HttpRequest) -> HttpResponse:
    """End the session."""
    logout(request)
    return redirect(settings.LOGOUT_REDIRECT_URL)


@sensitive_post_parameters()
@never_cache
@require_http_methods(["GET", "POST"])
def password(request: HttpRequest) -> HttpResponse:
    """Change one's own password; other sessions of the person end."""
    person = request.user
    assert isinstance(person, User)
    form = PasswordChangeForm(person, data=request.POST or None)
    if request.method == "POST" and form.is_valid():
        membership.set_password(by=Actor.of(request), person=person, password=form.cleaned_data["new_password1"])
        update_session_auth_hash(request, person)
        messages.success(request, "Your password is changed. Other devices must sign in again.")
        return redirect("home")
    return render(request, "register/password.html", {"form": form})


def onward(request: HttpRequest) -> str:
    """The address in `next` where it is one of this site, else the first page."""
    wanted = request.POST.get("next", request.GET.get("next", ""))
    if url_has_allowed_host_and_scheme(wanted, {request.get_host()}, require_https=request.is_secure()):
        return wanted
    return resolve_url(settings.LOGIN_REDIRECT_URL)
