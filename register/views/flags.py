"""An engineer accepts a flag for a time, or takes the acceptance back."""

from __future__ import annotations

from django.contrib import messages
from django.http import HttpRequest, HttpResponse
from django.shortcuts import redirect, render

from register import access, flagging
from register.auditing import Actor
from register.forms.fields import ReasonForm, typed
from register.forms.ranges import AcceptFlagForm


def flag_accept(request: HttpRequest, pk: int) -> HttpResponse:
    flag = access.get_flag(request, pk, "accept flag")
    form = AcceptFlagForm(typed(request), initial={"until": flag.accepted_until, "reason": flag.accepted_reason})
    done = form.submit(
        lambda: flagging.accept_flag(by=Actor.of(request), reason=form.why, flag=flag, until=form.cleaned_data["until"])
    )
    if done is not None:
        messages.success(request, f"Accepted up to {done.accepted_until}; it stays visible at {flag.tag}.")
        return redirect("tag", flag.tag_id)
    return render(request, "register/flag_accept.html", {"form": form, "flag": flag, "tag": flag.tag})


def flag_withdraw(request: HttpRequest, pk: int) -> HttpResponse:
    flag = access.get_flag(request, pk, "accept flag")
    form = ReasonForm(typed(request), asks="Why it is accepted no longer")
    done = form.submit(lambda: flagging.withdraw_acceptance(by=Actor.of(request), reason=form.why, flag=flag))
    if done is not None:
        messages.success(request, f"The acceptance at {flag.tag} is withdrawn.")
        return redirect("tag", flag.tag_id)
    return render(request, "register/flag_withdraw.html", {"form": form, "flag": flag, "tag": flag.tag})
