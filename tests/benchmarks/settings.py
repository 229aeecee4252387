"""Settings of the site with one page more: `/bare/`, a signed-in page with nothing on it."""

from register.settings import *  # noqa: F403
from register.settings import BASE_DIR, TEMPLATES

ROOT_URLCONF = "tests.benchmarks.urls"
TEMPLATES = [TEMPLATES[0] | {"DIRS": [BASE_DIR / "templates", BASE_DIR / "tests" / "benchmarks" / "templates"]}]
