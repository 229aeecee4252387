"""What the page of each stage of a sheet shows."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from calibration.contexts.sheet import (
    FieldView,
    Viewer,
    field_view,
    line_views,
    open_violations,
    reading_views,
    runs_shown,
    standard_views,
    verdict_words,
)
from calibration.models import Run, Sheet
from calibration.queries.drafts import Draft
from calibration.sheet_fields import KINDS

Stage = Sheet.Stage


def stage_context(draft: Draft, viewer: Viewer, *, repeat: str) -> dict[str, Any]:
    """What the page of the present stage shows besides the head."""
    stage = draft.sheet.stage
    if stage == Stage.CONFIRM:
        return {
            "tag_field": field_view(draft, "confirm-tag", viewer),
            "serial_field": field_view(draft, "confirm-serial", viewer),
        }
    if stage == Stage.CAUTIONS:
        return {"lines": line_views(draft, "cautions", viewer), "violations": open_violations(draft)}
    if stage == Stage.STANDARDS:
        return {"kind": Run.Kind.AS_FOUND, "standards": standard_views(draft, Run.Kind.AS_FOUND, viewer)}
    if stage in {Stage.AS_FOUND, Stage.AS_LEFT}:
        kind = Run.Kind.AS_FOUND if stage == Stage.AS_FOUND else Run.Kind.AS_LEFT
        return run_context(draft, kind, viewer, repeat=repeat) | {"log": field_view(draft, "adjust.log", viewer)}
    if stage == Stage.ADJUST:
        return {
            "choice": field_view(draft, "adjust.choice", viewer),
            "log": field_view(draft, "adjust.log", viewer),
            "found": finished(draft, Run.Kind.AS_FOUND, viewer),
            "as_left_limit": draft.basis.tolerance(Run.Kind.AS_LEFT).words(_unit(draft)),
        }
    if stage == Stage.RETURN:
        return {
            "lines": line_views(draft, "checklist", viewer),
            "remarks": field_view(draft, "remarks", viewer),
            "not_tested": draft.text("could-not-test"),
        }
    if stage == Stage.CORRECT:
        return {
            "runs": [run_context(draft, kind, viewer) for kind in KINDS],
            "choice": field_view(draft, "adjust.choice", viewer),
            "log": field_view(draft, "adjust.log", viewer),
            "lines": line_views(draft, "checklist", viewer),
            "remarks": field_view(draft, "remarks", viewer),
            "reason": field_view(draft, "correct.reason", viewer),
        }
    return _end_context(draft, viewer)


def _end_context(draft: Draft, viewer: Viewer) -> dict[str, Any]:
    password_error = "; ".join(viewer.errors.get("password", ()))
    viewer = Viewer(viewer.person)
    return {
        "runs": [finished(draft, kind, viewer) for kind in runs_shown(draft)],
        "not_tested": draft.text("could-not-test"),
        "adjusted": draft.text("adjust.choice"),
        "log": draft.text("adjust.log"),
        "lines": [line for line in line_views(draft, "checklist", viewer) if line.field.text],
        "remarks": field_view(draft, "remarks", viewer),
        "reason": field_view(draft, "correct.reason", viewer),
        "password_error": password_error,
    }


def run_state(draft: Draft, kind: str, viewer: Viewer, *, repeat: str = "") -> dict[str, Any]:
    """How a run stands: what changes with every reading."""
    verdict, css, why = verdict_words(draft, kind)
    return {
        "kind": kind,
        "readings": reading_views(draft, kind, viewer, repeat=repeat),
        "missing": len(draft.runs[kind].missing),
        "verdict": verdict,
        "verdict_css": css,
        "why": why,
    }


def run_context(draft: Draft, kind: str, viewer: Viewer, *, repeat: str = "") -> dict[str, Any]:
    """Everything the page of a run shows."""
    from register.engineering.units import LENGTH, PRESSURE, TEMPERATURE, choices
    from register.engineering.units import label as unit_label

    run = draft.runs[kind]
    standards = standard_views(draft, kind, viewer)
    unit_field = field_view(draft, f"{kind}.unit", viewer)
    digital_unit_field = field_view(draft, f"{kind}.digital-unit", viewer)
    conditions = [
        _condition(draft, kind, viewer, "ambient", "Ambient temperature", choices(TEMPERATURE)),
        _condition(draft, kind, viewer, "height", "Standard below the transmitter by", choices(LENGTH)),
        _condition(draft, kind, viewer, "static", "Static pressure during the run", choices(PRESSURE)),
    ]
    folded = [
        *(choice.field for choice in standards),
        *(unit_field, digital_unit_field),
        *(condition[name] for condition in conditions for name in ("field", "unit_field")),
    ]
    return run_state(draft, kind, viewer, repeat=repeat) | {
        "limit": draft.basis.tolerance(kind).words(_unit(draft)),
        "unit": unit_label(run.unit),
        "signed": _may_be_negative(draft),
        "with_digital": draft.sheet.basis.get("digital") == "yes",
        "digital_unit": unit_label(draft.text(f"{kind}.digital-unit") or draft.basis.unit),
        "square_root": draft.basis.transfer == "square root",
        "standards": standards,
        "unit_field": unit_field,
        "unit_chosen": _chosen(unit_field, choices(PRESSURE), run.unit),
        "pressure_units": choices(PRESSURE),
        "digital_unit_field": digital_unit_field,
        "digital_unit_chosen": _chosen(digital_unit_field, choices(PRESSURE), draft.basis.unit),
        "conditions_open": any(view.error or view.versions for view in folded),
        "problems": draft.problems_of(kind),
        "conditions": conditions,
    }


def finished(draft: Draft, kind: str, viewer: Viewer) -> dict[str, Any]:
    """A closed run as a table: nothing can be typed there."""
    from register.engineering.units import label as unit_label

    viewer = Viewer(viewer.person)
    verdict, css, why = verdict_words(draft, kind)
    return {
        "kind": kind,
        "readings": reading_views(draft, kind, viewer),
        "unit": unit_label(draft.runs[kind].unit),
        "missing": draft.runs[kind].missing,
        "verdict": verdict,
        "verdict_css": css,
        "why": why,
        "limit": draft.basis.tolerance(kind).words(_unit(draft)),
    }


def _condition(
    draft: Draft, kind: str, viewer: Viewer, name: str, label: str, units: Sequence[tuple[str, str]]
) -> dict[str, Any]:
    unit_field = field_view(draft, f"{kind}.{name}-unit", viewer)
    return {
        "label": label,
        "field": field_view(draft, f"{kind}.{name}", viewer),
        "unit_field": unit_field,
        "units": units,
        "unit": _chosen(unit_field, units, draft.unit_of(kind, name)),
    }


def _chosen(view: FieldView, offered: Sequence[tuple[str, str]], usual: str) -> str:
    """The unit that stands in a choice: also one that was not taken, as long as it can be shown."""
    return view.text if view.text in dict(offered) else usual


def _unit(draft: Draft) -> str:
    from register.engineering.units import label

    return label(draft.basis.unit)


def _may_be_negative(draft: Draft) -> bool:
    """Whether an input below zero can be asked for, so that a sign is needed beside the pad."""
    return min(draft.sheet.lrv_si, draft.sheet.urv_si) <= 0.0
