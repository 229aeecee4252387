"""The addresses of the steps of an import."""

from __future__ import annotations

from collections.abc import Callable
from functools import partial
from typing import Any

from django.http.response import HttpResponseBase
from django.urls import URLPattern, path
from django.views.decorators.http import require_GET, require_POST

from register.access import needs
from register.imports.kinds import KINDS, Kind
from register.views import importing


def steps(kind: Kind) -> list[URLPattern]:
    """Addresses below `import/`, each for those who may import."""
    KINDS[kind.name] = kind
    start, name = f"import/{kind.name}", f"import-{kind.name}"
    kept = f"{start}/<uuid:token>"

    def read(view: Callable[..., HttpResponseBase]) -> Any:
        return needs("import")(require_GET(partial(view, kind)))

    def send(view: Callable[..., HttpResponseBase]) -> Any:
        return needs("import")(require_POST(partial(view, kind)))

    return [
        path(f"{start}/", needs("import")(partial(importing.upload, kind)), name=name),
        path(f"{start}/sheet.csv", read(importing.blank_csv), name=f"{name}-csv"),
        path(f"{start}/sheet.xlsx", read(importing.blank_xlsx), name=f"{name}-xlsx"),
        path(f"{kept}/", needs("import")(partial(importing.match, kind)), name=f"{name}-match"),
        path(f"{kept}/check/", read(importing.check), name=f"{name}-check"),
        path(f"{kept}/bring-in/", send(importing.bring_in), name=f"{name}-bring-in"),
        path(f"{kept}/bad-rows.csv", read(importing.bad_rows), name=f"{name}-bad-rows"),
    ]
