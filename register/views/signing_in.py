"""Signing in and out, and changing one's own password."""

from __future__ import annotations

from django.conf import settings
from django.contrib import messages
from django.contrib.auth import login, logout, update_session_auth_hash
from django.contrib.auth.forms import PasswordChangeForm
from django.core.exceptions import ValidationError
from django.http import Http404, HttpRequest, HttpResponse, HttpResponseRedirect
from django.shortcuts import redirect, render, resolve_url
from django.utils.http import url_has_allowed_host_and_scheme
from django.views.decorators.cache import never_cache
from django.views.decorators.debug import sensitive_post_parameters
from django.views.decorators.http import require_http_methods, require_POST

from register import access, beginning, entering, membership
from register.auditing import Actor
from register.forms.people import FirstAdministratorForm, SignInForm
from register.models import User
from register.proxies import is_from_this_machine
from register.queries import demonstration_people


@sensitive_post_parameters("password")
@never_cache
@require_http_methods(["GET", "POST"])
def sign_in(request: HttpRequest) -> HttpResponse:
    """Ask for name and password; afterwards go to where the person was heading."""
    heading = onward(request)
    if request.user.is_authenticated:
        return HttpResponseRedirect(heading)
    if not User.objects.exists():
        return redirect("first-administrator")
    form = SignInForm(request, data=request.POST or None)
    if request.method == "POST" and form.is_valid():
        login(request, form.get_user())
        return HttpResponseRedirect(heading)
    context = {
        "form": form,
        "next": request.POST.get("next", request.GET.get("next", "")),
        "demonstration": demonstration_people() if is_from_this_machine(request) else [],
    }
    return render(request, "register/sign_in.html", context)


@require_POST
def sign_out(request: HttpRequest) -> HttpResponse:
    """End the session."""
    logout(request)
    return redirect(settings.LOGOUT_REDIRECT_URL)


@sensitive_post_parameters()
@require_http_methods(["GET", "POST"])
def password(request: HttpRequest) -> HttpResponse:
    """Change one's own password; other sessions of the person end."""
    person = access.person(request)
    form = PasswordChangeForm(person, data=request.POST or None)
    if request.method == "POST" and form.is_valid():
        person = membership.set_password(
            by=Actor.of(request),
            reason="changed by the person himself",
            person=person,
            password=form.cleaned_data["new_password1"],
        )
        update_session_auth_hash(request, person)
        request.session.pop(entering.TEMPORARY, None)
        messages.success(request, "Your password is changed. Other devices must sign in again.")
        return redirect("home")
    return render(
        request, "register/password.html", {"form": form, "must": request.session.get(entering.TEMPORARY, False)}
    )


@sensitive_post_parameters()
@never_cache
@require_http_methods(["GET", "POST"])
def first_administrator(request: HttpRequest) -> HttpResponse:
    """On an empty site: make the first plant and its administrator, with the code printed where it was started."""
    if User.objects.exists():
        raise Http404
    form = FirstAdministratorForm(request.POST or None, initial={"time_zone": "UTC"})
    if request.method == "POST" and form.is_valid():
        values = form.cleaned_data
        if not beginning.matches(values["code"]):
            form.add_error("code", "This is not the code. Small letters, digits and hyphens, as printed.")
        else:
            try:
                person = membership.begin(
                    remote_address=Actor.of(request).remote_address,
                    plant={
                        "code": values["plant_code"],
                        "name": values["plant_name"],
                        "time_zone": values["time_zone"],
                    },
                    person={"username": values["username"], "printed_name": values["printed_name"]},
                    password=values["password"],
                )
            except ValidationError as error:
                form.refuse(error)
            else:
                beginning.forget()
                login(request, person, backend="django.contrib.auth.backends.ModelBackend")
                messages.success(request, "The plant and its first administrator are made. Add people next.")
                return redirect("people")
    return render(request, "register/first_administrator.html", {"form": form})


def onward(request: HttpRequest) -> str:
    """The address in `next` where it is one of this site, else the first page."""
    wanted = request.POST.get("next", request.GET.get("next", ""))
    if url_has_allowed_host_and_scheme(wanted, {request.get_host()}, require_https=request.is_secure()):
        return wanted
    return resolve_url(settings.LOGIN_REDIRECT_URL)
