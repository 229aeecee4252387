"""The pages of a sheet, one per stage, and the steps between them."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from typing import Final

from django.core.exceptions import NON_FIELD_ERRORS, ValidationError
from django.http import Http404, HttpRequest, HttpResponse, QueryDict
from django.shortcuts import redirect, render
from django.utils import timezone
from django.utils.crypto import salted_hmac
from django.views.decorators.http import require_POST

from calibration import sheets, signing
from calibration.arriving import entries_from_json, readable
from calibration.contexts import sheet as sheet_page
from calibration.forms.sheets import SignForm
from calibration.models import Run, Sheet, Test
from calibration.passwords import confirmed
from calibration.queries.drafts import Draft
from calibration.queries.entries import NewEntry
from calibration.sheet_fields import ENDED, label
from calibration.storing_entries import Stored, add_entries, typed_in_form
from calibration.views.sheet_contexts import stage_context
from register import access
from register.auditing import Actor

Stage = Sheet.Stage
SHEETS = Sheet.objects.select_related(
    "plant", "tag__area", "transmitter__maker", "transmitter__type", "fitting", "opened_by", "corrects"
)
TEMPLATES: Final = {
    Stage.CONFIRM: "calibration/sheet_confirm.html",
    Stage.CAUTIONS: "calibration/sheet_cautions.html",
    Stage.STANDARDS: "calibration/sheet_standards.html",
    Stage.AS_FOUND: "calibration/sheet_run.html",
    Stage.ADJUST: "calibration/sheet_adjust.html",
    Stage.AS_LEFT: "calibration/sheet_run.html",
    Stage.RETURN: "calibration/sheet_return.html",
    Stage.CORRECT: "calibration/sheet_correct.html",
    Stage.SIGN: "calibration/sheet_sign.html",
    Stage.ABANDONED: "calibration/sheet_abandoned.html",
}
Act = Callable[[Actor, Sheet, QueryDict], object]
STEPS: Final[dict[str, Act]] = {
    "confirm": lambda by, sheet, sent: sheets.confirm(by=by, sheet_id=sheet.pk),
    "cautions": lambda by, sheet, sent: sheets.pass_cautions(by=by, sheet_id=sheet.pk),
    "standards": lambda by, sheet, sent: sheets.choose_standards(
        by=by, sheet_id=sheet.pk, kind=sent.get("kind", Run.Kind.AS_FOUND)
    ),
    "close-as-found": lambda by, sheet, sent: sheets.close_as_found(
        by=by, sheet_id=sheet.pk, with_gaps=sent.get("gaps") == "yes"
    ),
    "adjustment": lambda by, sheet, sent: sheets.record_adjustment(by=by, sheet_id=sheet.pk),
    "close-as-left": lambda by, sheet, sent: sheets.close_as_left(
        by=by, sheet_id=sheet.pk, with_gaps=sent.get("gaps") == "yes"
    ),
    "return": lambda by, sheet, sent: sheets.return_to_service(by=by, sheet_id=sheet.pk),
    "correction": lambda by, sheet, sent: sheets.finish_correction(by=by, sheet_id=sheet.pk),
    "back": lambda by, sheet, sent: sheets.step_back(by=by, sheet_id=sheet.pk),
    "save": lambda by, sheet, sent: sheet,
}


def sheet(request: HttpRequest, pk: object) -> HttpResponse:
    """The sheet at its present stage; once signed, the test it became."""
    held = access.get(request, SHEETS, "read", pk=pk)
    return shown(request, held)


@require_POST
def step(request: HttpRequest, pk: object, name: str) -> HttpResponse:
    """Keep what the form holds, then go on to the next stage."""
    held = access.get(request, SHEETS, "test", pk=pk)
    act = STEPS.get(name)
    if act is None:
        raise Http404
    refused = keep_form(request, held)
    if refused:
        return shown(request, access.get(request, SHEETS, "test", pk=pk), refused=refused)
    try:
        act(Actor.of(request), held, request.POST)
    except ValidationError as error:
        return shown(request, access.get(request, SHEETS, "test", pk=pk), error=error)
    return redirect("sheet", held.pk)


@require_POST
def sign(request: HttpRequest, pk: object) -> HttpResponse:
    """Check the password, then sign."""
    held = access.get(request, SHEETS, "test", pk=pk)
    refused = keep_form(request, held)
    if refused:
        return shown(request, access.get(request, SHEETS, "test", pk=pk), refused=refused)
    form = SignForm(request.POST)
    try:
        if not form.is_valid():
            raise ValidationError({name: [str(e) for e in errors] for name, errors in form.errors.items()})
        confirmed(request, access.person(request), form.cleaned_data["password"])
        record = signing.sign(by=Actor.of(request), sheet_id=held.pk, acknowledged=request.POST.getlist("acknowledged"))
    except ValidationError as error:
        return shown(request, access.get(request, SHEETS, "test", pk=pk), error=error)
    return redirect("test", record.test_id)


@dataclass(frozen=True, slots=True)
class NotTaken:
    """Something typed that the sheet does not hold, and why."""

    field: str
    text: str
    why: str

    @property
    def what(self) -> str:
        return label(self.field)


def keep_form(request: HttpRequest, held: Sheet) -> list[NotTaken]:
    """Store the fields of a posted form that its reader changed; gives what was not taken.

    Nobody goes on with a step while something is not taken: it would be left behind unseen.
    """
    refused, stood_on = _keep_queue(request, held)
    seen = {name.removeprefix("seen."): request.POST[name] for name in request.POST if name.startswith("seen.")}
    if not seen or held.stage in ENDED:
        return refused
    seen = {name: stood_on.get(base, base) for name, base in seen.items()}
    values = {name: str(request.POST.get(name, "")) for name in seen}
    new = typed_in_form(Draft(held), values, seen, device=_device_of(request))
    if not new:
        return refused
    stored = add_entries(by=Actor.of(request), sheet_id=held.pk, entries=new)
    return list(dict.fromkeys([*refused, *_not_taken(new, stored)]))


def _keep_queue(request: HttpRequest, held: Sheet) -> tuple[list[NotTaken], dict[str, str]]:
    """Store what the device had not handed over when the form was sent.

    Gives what was not taken, and what that was typed over, by the numbers of the entries.
    """
    queue = request.POST.get("queue", "")
    if not queue:
        return [], {}
    try:
        entries = entries_from_json(queue)
    except ValidationError as error:
        return [NotTaken("", "", words) for words in error.messages], {}
    stored = add_entries(by=Actor.of(request), sheet_id=held.pk, entries=entries)
    bases = {entry.id: entry.base for entry in entries}
    return _not_taken(entries, stored), {str(number): str(bases[number] or "") for number, _ in stored.refused}


def _not_taken(entries: Iterable[NewEntry], stored: Stored) -> list[NotTaken]:
    sent = {entry.id: entry for entry in entries}
    return [NotTaken(sent[number].field, readable(sent[number].text), why) for number, why in stored.refused]


def _device_of(request: HttpRequest) -> str:
    """A name for the browser of this session; who reads the entries learns nothing of the session from it."""
    return f"form-{salted_hmac('form of a sheet', request.session.session_key or 'none').hexdigest()[:12]}"


def shown(
    request: HttpRequest, held: Sheet, *, error: ValidationError | None = None, refused: Sequence[NotTaken] = ()
) -> HttpResponse:
    """The page of the present stage, with what was refused."""
    if held.stage == Stage.SIGNED:
        test = held.corrects or Test.objects.filter(sheet=held).first()
        if test is None:
            raise Http404
        return redirect("test", test.pk)
    person = access.person(request)
    errors, general = _told(error)
    viewer = sheet_page.Viewer(
        person, errors | {one.field: [one.why] for one in refused}, {one.field: one.text for one in refused}
    )
    draft = Draft(held)
    stage = stage_context(draft, viewer, repeat=request.GET.get("repeat", ""))
    context = {
        "sheet": held,
        "draft": draft,
        "zone": held.plant.time_zone,
        "steps": sheet_page.steps(draft),
        "others": sheet_page.others(draft, person, timezone.now()),
        "general": general,
        "refused": refused,
        "beside": viewer.met.keys() & {one.field for one in refused},
        "mend": [view for name, view in viewer.met.items() if name in errors and not refused],
        "gaps": error is not None and getattr(error, "code", "") == "gaps",
        "may_test": access.may(person, "test", held.plant_id) and held.stage not in ENDED,
        "now": sheet_page.clock(timezone.now(), draft.zone),
        "loaded_at": timezone.now().isoformat(),
        "changes": signing.changes_since(held) if held.stage not in ENDED else [],
        "clashes": [sheet_page.field_view(draft, kept.name, sheet_page.Viewer(person)) for kept in draft.clashes],
        **stage,
    }
    return render(request, TEMPLATES[Stage(held.stage)], context)


def _told(error: ValidationError | None) -> tuple[dict[str, list[str]], list[str]]:
    """Errors by field, and those that belong to none."""
    if error is None:
        return {}, []
    if not hasattr(error, "error_dict"):
        return {}, error.messages
    by_field = dict(error.message_dict)
    return by_field, by_field.pop(NON_FIELD_ERRORS, [])
