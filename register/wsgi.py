"""WSGI entry; loads what the first page would otherwise wait for."""

import os

from django.core.wsgi import get_wsgi_application

os.environ.setdefault("DJANGO_SETTINGS_MODULE", "register.settings")

application = get_wsgi_application()
