"""Who may see and do what.

Every url names its permission: `path("tags/<int:pk>/", needs("read")(tag), name="tag")`. A view without one is
refused by `PermissionMiddleware`. A person has roles per plant; an object of a plant he has no role in does not
exist for him (404), one he may read but not change is refused (403).
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any, Final, TypeVar
from urllib.parse import urlencode

from django.conf import settings
from django.contrib.auth.views import redirect_to_login
from django.core.exceptions import BadRequest, PermissionDenied
from django.db import models
from django.http import Http404, HttpRequest, HttpResponse, JsonResponse
from django.http.response import HttpResponseBase
from django.shortcuts import get_object_or_404, redirect, resolve_url
from django.urls import reverse

from register.fragments import wants_part
from register.models import Area, Flag, Membership, Plant, Role, Tag, Transmitter, User

READ: Final = "read"
SAFE: Final = frozenset({"GET", "HEAD", "OPTIONS"})
YEAR: Final = 365 * 24 * 3600
PERMISSIONS: Final[dict[str, frozenset[str]]] = {
    "read": frozenset(Role.values),
    "edit register": frozenset({Role.ENGINEER, Role.ADMINISTRATOR}),
    "edit catalogue": frozenset({Role.ENGINEER, Role.ADMINISTRATOR}),
    "fit": frozenset({Role.ENGINEER, Role.TECHNICIAN, Role.PLANNER}),
    "re-range": frozenset({Role.ENGINEER}),
    "accept flag": frozenset({Role.ENGINEER}),
    "set requirement": frozenset({Role.ENGINEER}),
    "test": frozenset({Role.TECHNICIAN, Role.ENGINEER}),
    "review": frozenset({Role.REVIEWER, Role.ENGINEER}),
    "allow exception": frozenset({Role.ENGINEER, Role.REVIEWER}),
    "plan": frozenset({Role.PLANNER}),
    "approve deferral": frozenset({Role.ENGINEER}),
    "withdraw deferral": frozenset({Role.ENGINEER, Role.PLANNER}),
    "edit standards": frozenset({Role.ENGINEER, Role.PLANNER, Role.ADMINISTRATOR}),
    "edit guidance": frozenset({Role.ENGINEER, Role.ADMINISTRATOR}),
    "import": frozenset({Role.ENGINEER, Role.ADMINISTRATOR}),
    "manage plant": frozenset({Role.ADMINISTRATOR}),
    "manage people": frozenset({Role.ADMINISTRATOR}),
}
#: Besides roles: "public" (anyone, signed in or not) and "signed in" (any active person).
OPEN: Final = frozenset({"public", "signed in"})

#: Pages of somebody whose password was given to him by another: nothing may be done or signed with it.
WITH_TEMPORARY_PASSWORD: Final = frozenset({"password", "sign-out"})

View = Callable[..., HttpResponseBase]
V = TypeVar("V", bound=View)
M = TypeVar("M", bound=models.Model)


def needs(permission: str) -> Callable[[V], V]:
    """Give a view its permission; used in the urls, never in the views."""
    if permission not in PERMISSIONS and permission not in OPEN:
        raise ValueError(f"no such permission: {permission}")

    def mark(view: V) -> V:
        def guarded(request: HttpRequest, *args: Any, **kwargs: Any) -> HttpResponseBase:
            return view(request, *args, **kwargs)

        guarded.__name__ = getattr(view, "__name__", "view")
        guarded.__doc__ = view.__doc__
        guarded.__module__ = view.__module__
        guarded.__dict__.update(getattr(view, "__dict__", {}))
        guarded.permission = permission  # type: ignore[attr-defined]
        return guarded  # type: ignore[return-value]

    return mark


class PermissionMiddleware:
    """Refuses views without a stated permission, and people without it in any plant."""

    def __init__(self, get_response: Callable[[HttpRequest], HttpResponse]) -> None:
        self.get_response = get_response

    def __call__(self, request: HttpRequest) -> HttpResponse:
        response = self.get_response(request)
        # Lists go on in the plant of the thing last looked at.
        if getattr(request, "plant_of_page", None) is not None and len(roles(person(request))) > 1:
            plant = shown_plant(request)
            if plant and request.COOKIES.get("plant") != plant.code:
                keep_plant(response, plant.code)
        return response

    def process_view(
        self, request: HttpRequest, view: View, args: tuple[Any, ...], kwargs: dict[str, Any]
    ) -> HttpResponse | None:
        permission = getattr(view, "permission", None)
        if permission is None:
            raise PermissionDenied("This page has no stated permission.")
        if permission == "public":
            return None
        if not request.user.is_authenticated:
            return to_sign_in(request)
        if request.session.get("password_is_temporary") and view_name(request) not in WITH_TEMPORARY_PASSWORD:
            return redirect("password")
        if permission == "signed in" or may_anywhere(request.user, permission):
            return None
        raise PermissionDenied(f"None of your roles lets you {permission}.")


def to_sign_in(request: HttpRequest) -> HttpResponse:
    """Send a person who is not signed in to the door, without losing what he typed.

    A page is redirected. A script that sends what was typed gets 401 and keeps it; one that only reads a
    fragment is told to load the door as a page.
    """
    if not request.accepts("text/html"):
        return JsonResponse({"error": "signed out", "sign_in": resolve_url("sign-in")}, status=401)
    htmx = getattr(request, "htmx", None)
    if not htmx:
        return redirect_to_login(request.get_full_path())
    if request.method != "GET":
        return HttpResponse("Signed out: sign in again in another window. What is typed here stays.", status=401)
    response = HttpResponse(status=401)
    response["HX-Redirect"] = redirect_to_login(htmx.current_url_abs_path or "/").url
    return response


def view_name(request: HttpRequest) -> str:
    """Name of the url that was asked for; empty where it has none."""
    return (request.resolver_match.url_name if request.resolver_match else "") or ""


def roles(user: User) -> dict[int, set[str]]:
    """Roles of a person by plant id; read once per request object."""
    cached: dict[int, set[str]] | None = getattr(user, "_roles_by_plant", None)
    if cached is None:
        cached = {}
        for plant_id, role in Membership.objects.filter(user=user).order_by("pk").values_list("plant_id", "role"):
            cached.setdefault(plant_id, set()).add(role)
        user._roles_by_plant = cached  # type: ignore[attr-defined]
    return cached


def may(user: User, permission: str, plant_id: int) -> bool:
    """Whether a person has a permission in a plant."""
    return bool(PERMISSIONS[permission] & roles(user).get(plant_id, set()))


def acts_for(user: User | None, permission: str, plant_id: int) -> bool:
    """Whether an act may go on that needs a further permission; what the site itself does needs none."""
    return user is None or may(user, permission, plant_id)


def may_anywhere(user: User, permission: str) -> bool:
    """Whether a person has a permission in at least one plant."""
    return any(PERMISSIONS[permission] & held for held in roles(user).values())


def plants(user: User, permission: str = READ) -> models.QuerySet[Plant]:
    """Plants in which a person has a permission."""
    ids = [plant_id for plant_id, held in roles(user).items() if PERMISSIONS[permission] & held]
    return Plant.objects.filter(pk__in=ids)


def in_plant(request: HttpRequest, plant_id: int, permission: str) -> None:
    """Let pass, or answer 404 where nothing may be seen and 403 where it may be read only."""
    user = person(request)
    if not may(user, READ, plant_id):
        raise Http404
    request.plant_of_page = plant_id  # type: ignore[attr-defined]
    if not may(user, permission, plant_id):
        raise PermissionDenied(f"Your roles in this plant do not let you {permission}.")


def get(request: HttpRequest, queryset: models.QuerySet[M], permission: str, **lookup: Any) -> M:
    """The object, if its plant (`plant_id` on it) lets the person; else 404 or 403."""
    thing = get_object_or_404(queryset, **lookup)
    in_plant(request, thing.plant_id, permission)  # type: ignore[attr-defined]
    return thing


def get_tag(request: HttpRequest, pk: int, permission: str = READ) -> Tag:
    return get(request, Tag.objects.select_related("plant", "area"), permission, pk=pk)


def get_transmitter(request: HttpRequest, pk: int, permission: str = READ) -> Transmitter:
    return get(request, Transmitter.objects.select_related("plant", "maker", "type", "head"), permission, pk=pk)


def get_area(request: HttpRequest, pk: int, permission: str = READ) -> Area:
    return get(request, Area.objects.select_related("plant"), permission, pk=pk)


def get_flag(request: HttpRequest, pk: int, permission: str = READ) -> Flag:
    flag = get_object_or_404(Flag.objects.select_related("tag", "tag__plant"), pk=pk)
    in_plant(request, flag.tag.plant_id, permission)
    return flag


def get_plant(request: HttpRequest, code: str, permission: str = READ) -> Plant:
    plant = get_object_or_404(Plant, code=code)
    in_plant(request, plant.pk, permission)
    return plant


def get_person(request: HttpRequest, pk: int) -> User:
    """A person whom the asking administrator can see: of one of his plants, or without any role; else 404."""
    mine = plants(person(request), "manage people")
    found = User.objects.filter(models.Q(memberships__plant__in=mine) | models.Q(memberships=None))
    return get_object_or_404(found.distinct(), pk=pk)


def governs(user: User, person: User) -> bool:
    """Whether a user administers every plant in which a person has a role, and so may act on the person himself."""
    mine = {plant_id for plant_id, held in roles(user).items() if PERMISSIONS["manage people"] & held}
    return bool(mine) and set(roles(person)) <= mine


def readable_plants(user: User) -> list[Plant]:
    """Plants in which a person has any role, by name; read once per request."""
    cached: list[Plant] | None = getattr(user, "_readable_plants", None)
    if cached is None:
        cached = list(plants(user))
        user._readable_plants = cached  # type: ignore[attr-defined]
    return cached


def shown_plant(request: HttpRequest) -> Plant | None:
    """The plant of the thing shown, else the one named by `?plant=CODE`, the one last chosen, that of the first role.

    None without any role.
    """
    user = person(request)
    available = readable_plants(user)
    of_page = getattr(request, "plant_of_page", None)
    if of_page is not None:
        return next((plant for plant in available if plant.pk == of_page), None)
    wanted = request.GET.get("plant") or request.COOKIES.get("plant", "")
    first = next(iter(roles(user)), None)
    return next(
        (plant for plant in available if plant.code == wanted),
        next((plant for plant in available if plant.pk == first), None),
    )


def keep_plant(response: HttpResponse, code: str) -> None:
    """Keep the plant that lists show in a cookie; it grants nothing."""
    response.set_cookie(
        "plant", code, max_age=YEAR, httponly=True, samesite="Lax", secure=settings.SESSION_COOKIE_SECURE
    )


def chosen_plant(request: HttpRequest, permission: str = READ) -> Plant:
    """The plant of a page that no single thing decides: the one its address names, else as `shown_plant`.

    From here on the address names it, so that every form, part and page that this one leads to stays in this plant
    whatever is looked at in another window. What is sent, and what asks for a part of a page, must name it itself
    where the person has a choice: a cookie that another window may have changed decides nothing that is kept.

    Parameters
    ----------
    permission : str
        An unnamed plant is one in which the person has this.

    Raises
    ------
    Http404
        The address names a plant of others, or there is none.
    PermissionDenied
        The address names a plant in which the person has not that permission.
    BadRequest
        Something is sent that does not say for which of several plants.
    """
    user = person(request)
    wanted = request.GET.get("plant")
    if not wanted and len(readable_plants(user)) > 1 and (request.method not in SAFE or wants_part(request)):
        raise BadRequest("This does not say for which plant it is.")
    plant = shown_plant(request)
    if plant is None:
        raise Http404("You have no role in any plant yet: ask an administrator.")
    if wanted and wanted != plant.code:
        raise Http404
    if not wanted and not may(user, permission, plant.pk):
        plant = plants(user, permission).first() or plant
    in_plant(request, plant.pk, permission)
    named = request.GET.copy()
    named["plant"] = plant.code
    request.GET = named  # type: ignore[assignment]
    return plant


def address_in(plant: Plant, name: str, *args: Any) -> str:
    """The address of a page, in that plant."""
    return f"{reverse(name, args=args)}?{urlencode({'plant': plant.code})}"


def person(request: HttpRequest) -> User:
    """Who asks."""
    if not isinstance(request.user, User):
        raise PermissionDenied("Sign in first.")
    return request.user


def allowed(request: HttpRequest, plant_id: int, permission: str) -> bool:
    """Whether the person may do so in a plant; for links that are shown to those only who can follow them."""
    return may(person(request), permission, plant_id)


def readable_ids(request: HttpRequest) -> list[int]:
    """Ids of the plants in which the person has any role."""
    return [plant_id for plant_id, held in roles(person(request)).items() if PERMISSIONS[READ] & held]
