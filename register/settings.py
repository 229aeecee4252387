"""Settings of the site; everything a machine may differ in comes from FOUNDLEFT_* variables."""

from __future__ import annotations

from pathlib import Path

from csp.constants import NONE, SELF

from register import environment

BASE_DIR = Path(__file__).resolve().parent.parent
DATA_DIR = environment.data_folder(BASE_DIR / ".data")
SECRET_KEY = environment.secret_key(DATA_DIR)
DEBUG = environment.flag("FOUNDLEFT_DEBUG", False)
HTTPS = environment.flag("FOUNDLEFT_HTTPS", False)
ALLOWED_HOSTS = environment.hosts("FOUNDLEFT_HOSTS", ["localhost", "127.0.0.1", "[::1]"])

INSTALLED_APPS = [
    "django.contrib.auth",
    "django.contrib.contenttypes",
    "django.contrib.sessions",
    "django.contrib.messages",
    "django.contrib.staticfiles",
    "django_htmx",
    "template_partials",
    "axes",
    "csp",
    "register",
    "calibration",
]
AUTH_USER_MODEL = "register.User"

MIDDLEWARE = [
    "register.proxies.ProxyMiddleware",
    "django.middleware.security.SecurityMiddleware",
    "whitenoise.middleware.WhiteNoiseMiddleware",
    "csp.middleware.CSPMiddleware",
    "django.contrib.sessions.middleware.SessionMiddleware",
    "django.middleware.common.CommonMiddleware",
    "django.middleware.csrf.CsrfViewMiddleware",
    "django.contrib.auth.middleware.AuthenticationMiddleware",
    "django.contrib.messages.middleware.MessageMiddleware",
    "django.middleware.clickjacking.XFrameOptionsMiddleware",
    "django_htmx.middleware.HtmxMiddleware",
    "register.caching.PrivateMiddleware",
    "register.addresses.AddressMiddleware",
    "register.access.PermissionMiddleware",
    "axes.middleware.AxesMiddleware",
]

ROOT_URLCONF = "register.urls"
WSGI_APPLICATION = "register.wsgi.application"

TEMPLATES = [
    {
        "BACKEND": "django.template.backends.django.DjangoTemplates",
        "DIRS": [BASE_DIR / "templates"],
        "OPTIONS": {
            "context_processors": [
                "django.template.context_processors.request",
                "django.contrib.auth.context_processors.auth",
                "django.contrib.messages.context_processors.messages",
                "register.context.page",
            ],
            "builtins": ["template_partials.templatetags.partials"],
            "loaders": [
                (
                    "template_partials.loader.Loader",
                    [
                        (
                            "django.template.loaders.cached.Loader",
                            [
                                "django.template.loaders.filesystem.Loader",
                                "django.template.loaders.app_directories.Loader",
                            ],
                        )
                    ],
                )
            ],
        },
    }
]

DATABASES = {"default": environment.database(DATA_DIR / "foundleft.sqlite3")}
#: What every SQLite connection begins with; recursive triggers, or INSERT OR REPLACE slips past the guards.
SQLITE_OPTIONS = {
    "transaction_mode": "IMMEDIATE",
    "timeout": 20,
    "init_command": (
        "PRAGMA journal_mode=WAL; PRAGMA synchronous=FULL; PRAGMA foreign_keys=ON; PRAGMA recursive_triggers=ON;"
        "PRAGMA cache_size=-64000; PRAGMA mmap_size=268435456; PRAGMA temp_store=MEMORY;"
    ),
}
if DATABASES["default"]["ENGINE"] == environment.SQLITE:
    DATABASES["default"]["OPTIONS"] = SQLITE_OPTIONS
DEFAULT_AUTO_FIELD = "django.db.models.BigAutoField"

AUTHENTICATION_BACKENDS = ["axes.backends.AxesStandaloneBackend", "django.contrib.auth.backends.ModelBackend"]
AUTH_PASSWORD_VALIDATORS = [
    {"NAME": "django.contrib.auth.password_validation.UserAttributeSimilarityValidator"},
    {"NAME": "django.contrib.auth.password_validation.MinimumLengthValidator", "OPTIONS": {"min_length": 10}},
    {"NAME": "django.contrib.auth.password_validation.CommonPasswordValidator"},
]
LOGIN_URL = "sign-in"
LOGIN_REDIRECT_URL = "home"
LOGOUT_REDIRECT_URL = "sign-in"
AXES_FAILURE_LIMIT = 8
AXES_COOLOFF_TIME = 0.25
AXES_LOCKOUT_PARAMETERS = [["username", "ip_address"]]
AXES_RESET_ON_SUCCESS = True
AXES_LOCKOUT_TEMPLATE = "register/locked_out.html"
AXES_VERBOSE = False
AXES_RESET_COOL_OFF_ON_FAILURE_DURING_LOCKOUT = False
AXES_SENSITIVE_PARAMETERS = ["password", "old_password", "new_password1", "new_password2", "code"]

#: Functions called with the ids of the tags that a register act touched, in its transaction.
AFTER_REGISTER_CHANGE = ["calibration.scheduling.refresh"]
#: Functions asked with a tag or transmitter and a day whether a change may be dated back so far; they answer an
#: objection or "".
BEFORE_BACKDATING = ["calibration.objections.to_backdating"]
#: Acts of `manage.py apply_planned`, in their order, with what they count: one of them, several of them.
EVERY_DAY = {
    "register.reranging.apply_planned": ("planned range is in force", "planned ranges are in force"),
    "calibration.scheduling.apply_planned": ("planned requirement is in force", "planned requirements are in force"),
    "register.flagging.end_lapsed_acceptances": ("acceptance has ended", "acceptances have ended"),
}
#: Functions called with a new plant and who made it, in the transaction of the act that makes it.
AFTER_PLANT_CREATED = ["calibration.provision.provide_defaults"]

LANGUAGE_CODE = "en"
TIME_ZONE = "UTC"
USE_TZ = True
USE_I18N = False

STATIC_URL = "static/"
STATIC_ROOT = DATA_DIR / "static"
STATICFILES_DIRS = [BASE_DIR / "static"]
MEDIA_ROOT = DATA_DIR / "files"
#: No file is taken in that is larger than any that is read here.
FILE_UPLOAD_HANDLERS = [
    "register.imports.uploads.BoundedUpload",
    "django.core.files.uploadhandler.MemoryFileUploadHandler",
    "django.core.files.uploadhandler.TemporaryFileUploadHandler",
]
STORAGES = {
    "default": {"BACKEND": "django.core.files.storage.FileSystemStorage"},
    "staticfiles": {"BACKEND": "django.contrib.staticfiles.storage.ManifestStaticFilesStorage"},
}

CONTENT_SECURITY_POLICY = {
    "DIRECTIVES": {
        "default-src": [SELF],
        "object-src": [NONE],
        "base-uri": [SELF],
        "form-action": [SELF],
        "frame-ancestors": [NONE],
    }
}
SECURE_CONTENT_TYPE_NOSNIFF = True
SECURE_REFERRER_POLICY = "same-origin"
X_FRAME_OPTIONS = "DENY"
SESSION_COOKIE_HTTPONLY = True
SESSION_COOKIE_SAMESITE = "Lax"
SESSION_COOKIE_SECURE = HTTPS
CSRF_COOKIE_SECURE = HTTPS
SECURE_SSL_REDIRECT = HTTPS
SECURE_HSTS_SECONDS = environment.whole_number("FOUNDLEFT_HSTS_SECONDS", 31536000) if HTTPS else 0
SECURE_HSTS_INCLUDE_SUBDOMAINS = HTTPS
SECURE_HSTS_PRELOAD = HTTPS
SESSION_COOKIE_AGE = 12 * 3600
CSRF_TRUSTED_ORIGINS = environment.origins("FOUNDLEFT_ORIGINS")
#: Reverse proxies that are believed about the address and scheme a request came with (`register.proxies`).
TRUSTED_PROXIES = environment.networks("FOUNDLEFT_PROXIES")
SECURE_PROXY_SSL_HEADER = ("HTTP_X_FORWARDED_PROTO", "https") if TRUSTED_PROXIES else None
EMAIL_BACKEND = "django.core.mail.backends.console.EmailBackend"

LOG_LEVEL = environment.one_of("FOUNDLEFT_LOG_LEVEL", ("DEBUG", "INFO", "WARNING", "ERROR"), "INFO")
LOGGING = {
    "version": 1,
    "disable_existing_loggers": False,
    "formatters": {"line": {"format": "{asctime} {levelname} {name}: {message}", "style": "{"}},
    "handlers": {"stderr": {"class": "logging.StreamHandler", "formatter": "line"}},
    "root": {"handlers": ["stderr"], "level": "WARNING"},
    "loggers": {
        "django": {"handlers": ["stderr"], "level": "WARNING", "propagate": False},
        # Refused and missing pages are no fault of the site; what fails inside it is.
        "django.request": {"level": "ERROR"},
        # Its warnings hold sign-in names as typed, which may be passwords; the audit trail tells of failures.
        "axes": {"handlers": ["stderr"], "level": "ERROR", "propagate": False},
        "register": {"handlers": ["stderr"], "level": LOG_LEVEL, "propagate": False},
        "calibration": {"handlers": ["stderr"], "level": LOG_LEVEL, "propagate": False},
    },
}
