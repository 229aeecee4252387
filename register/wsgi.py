"""WSGI entry; loads what the first page with a chart or a unit would otherwise wait for."""

import gc
import importlib
import os

from django.core.wsgi import get_wsgi_application

os.environ.setdefault("DJANGO_SETTINGS_MODULE", "register.settings")

application = get_wsgi_application()

for name in ("numpy", "scipy.stats", "scipy.optimize", "matplotlib.figure", "matplotlib.backends.backend_svg"):
    importlib.import_module(name)

from register.engineering.units import to_si  # noqa: E402 - after the settings are loaded

to_si(1.0, "bar")

# What is loaded by now stays: a full collection would look through it all, which takes several times as long as a page.
gc.collect()
gc.freeze()
