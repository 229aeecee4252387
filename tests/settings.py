"""Settings under test: a fast password hash, no lock-out by default, static files straight from their folders.

`DATABASE_URL` chooses the database as it does for the site; without it tests run on SQLite in memory.
"""

import os
import tempfile

os.environ.setdefault("FOUNDLEFT_SECRET_KEY", "only for tests " * 4)

from register.settings import *  # noqa: F403

PASSWORD_HASHERS = ["django.contrib.auth.hashers.MD5PasswordHasher"]
AXES_ENABLED = False
#: Files that are brought lie on a disk, as on the site; thrown away when the tests end.
_FILES = tempfile.TemporaryDirectory(prefix="foundleft-tests-")
MEDIA_ROOT = _FILES.name
STORAGES = {
    "default": {"BACKEND": "django.core.files.storage.FileSystemStorage"},
    "staticfiles": {"BACKEND": "django.contrib.staticfiles.storage.StaticFilesStorage"},
}
WHITENOISE_AUTOREFRESH = True
WHITENOISE_USE_FINDERS = True
