"""The one settings file. Everything a site may choose comes from ``WORKSHEET_…`` environment variables."""

import secrets
from datetime import timedelta
from pathlib import Path

import dj_database_url

from worksheet import environment as env

BASE_DIR = Path(__file__).resolve().parent.parent
DATA_DIR = Path(env.text("WORKSHEET_DATA", str(BASE_DIR / ".data")))

DEBUG = env.flag("WORKSHEET_DEBUG")
# Without a key in the environment every start makes a new one: sessions end with the process. `serve` refuses that.
SECRET_KEY_GIVEN = bool(env.text("WORKSHEET_SECRET_KEY"))
SECRET_KEY = env.text("WORKSHEET_SECRET_KEY") or secrets.token_urlsafe(50)
SECRET_KEY_FALLBACKS = env.words("WORKSHEET_OLD_SECRET_KEYS")  # while a key is being changed
HTTPS = env.flag("WORKSHEET_HTTPS")
ALLOWED_HOSTS = env.words("WORKSHEET_HOSTS", "127.0.0.1,localhost,[::1]")
CSRF_TRUSTED_ORIGINS = env.words("WORKSHEET_ORIGINS")

INSTALLED_APPS = [
    "worksheet.ward",
    "worksheet.review",
    "worksheet.transfer",
    "worksheet.report",
    "django.contrib.auth",
    "django.contrib.contenttypes",
    "django.contrib.sessions",
    "django.contrib.messages",
    "django.contrib.staticfiles",
    "django_htmx",
    "axes",
    "django_otp",
    "django_otp.plugins.otp_totp",
    "django_otp.plugins.otp_static",
]

MIDDLEWARE = [
    "django.middleware.security.SecurityMiddleware",
    "worksheet.ward.middleware.content_policy",
    "whitenoise.middleware.WhiteNoiseMiddleware",
    "django.contrib.sessions.middleware.SessionMiddleware",
    "django.middleware.common.CommonMiddleware",
    "django.middleware.csrf.CsrfViewMiddleware",
    "django.contrib.auth.middleware.AuthenticationMiddleware",
    "django_otp.middleware.OTPMiddleware",
    "worksheet.ward.middleware.session_limits",
    "django.contrib.auth.middleware.LoginRequiredMiddleware",
    "worksheet.ward.middleware.second_factor",
    "django.contrib.messages.middleware.MessageMiddleware",
    "django.middleware.clickjacking.XFrameOptionsMiddleware",
    "django_htmx.middleware.HtmxMiddleware",
    "axes.middleware.AxesMiddleware",
]

ROOT_URLCONF = "worksheet.urls"
WSGI_APPLICATION = "worksheet.wsgi.application"
AUTH_USER_MODEL = "ward.User"
AUTHENTICATION_BACKENDS = [
    "axes.backends.AxesStandaloneBackend",
    "worksheet.ward.logins.AccountCap",
    "django.contrib.auth.backends.ModelBackend",
]
LOGIN_URL = "login"
LOGIN_REDIRECT_URL = "home"
LOGOUT_REDIRECT_URL = "login"

TEMPLATES = [
    {
        "BACKEND": "django.template.backends.django.DjangoTemplates",
        "DIRS": [BASE_DIR / "templates"],
        "OPTIONS": {
            "context_processors": [
                "django.template.context_processors.request",
                "django.contrib.auth.context_processors.auth",
                "django.contrib.messages.context_processors.messages",
                "worksheet.ward.middleware.session_context",
            ],
            "loaders": [
                (
                    "django.template.loaders.cached.Loader",
                    [
                        "django.template.loaders.filesystem.Loader",
                        "django.template.loaders.app_directories.Loader",
                    ],
                ),
            ],
        },
    },
]

DATABASES = {
    "default": dj_database_url.parse(
        env.text("WORKSHEET_DATABASE") or f"sqlite:///{DATA_DIR / 'worksheet.sqlite3'}",
        conn_max_age=60,
        conn_health_checks=True,  # a database server that was restarted costs nobody an error page
    )
}
if DATABASES["default"]["ENGINE"] == "django.db.backends.sqlite3":
    # Measured: deferred transactions lose writes to "database is locked"; FULL loses none at a power cut.
    DATABASES["default"]["OPTIONS"] = {
        "transaction_mode": "IMMEDIATE",
        "timeout": 20,
        "init_command": "PRAGMA journal_mode=WAL; PRAGMA synchronous=FULL; PRAGMA foreign_keys=ON;",
    }

PASSWORD_HASHERS = ["django.contrib.auth.hashers.Argon2PasswordHasher"]
# NIST SP 800-63B-4: 15 characters where the password stands alone, a list of common ones, no rules of composition.
AUTH_PASSWORD_VALIDATORS = [
    {"NAME": "django.contrib.auth.password_validation.MinimumLengthValidator", "OPTIONS": {"min_length": 15}},
    {"NAME": "django.contrib.auth.password_validation.CommonPasswordValidator"},
    {"NAME": "worksheet.ward.passwords.SiteListValidator"},
    {"NAME": "django.contrib.auth.password_validation.UserAttributeSimilarityValidator"},
    {"NAME": "worksheet.ward.passwords.EasyPatternValidator"},
]
PASSWORD_LIST = env.text("WORKSHEET_PASSWORD_LIST")  # a file of breached passwords, one a line; none is shipped
SECOND_FACTOR_REQUIRED = env.flag("WORKSHEET_SECOND_FACTOR")
OTP_TOTP_ISSUER = "Oxygen delivery worksheet"

# Locks the pair of user name and address, so that one mistyped name does not lock a whole ward behind one address.
AXES_FAILURE_LIMIT = env.number("WORKSHEET_LOGIN_TRIES", 8, 3, 100)
AXES_LOCKOUT_PARAMETERS = [["username", "ip_address"]]
AXES_COOLOFF_TIME = timedelta(minutes=15)
AXES_RESET_ON_SUCCESS = True
AXES_RESET_COOL_OFF_ON_FAILURE_DURING_LOCKOUT = False  # whoever goes on trying neither prolongs nor counts
AXES_LOCKOUT_TEMPLATE = "registration/locked.html"
AXES_HTTP_RESPONSE_CODE = 429
AXES_DISABLE_ACCESS_LOG = True
AXES_VERBOSE = False
AXES_CLIENT_IP_CALLABLE = "worksheet.ward.logins.client_address"
PROXIES = env.number("WORKSHEET_PROXIES", 0, 0, 5)  # reverse proxies of our own in front of `serve`
WRONG_LOGINS_CAP = 100  # in a row, from all addresses together; then the unit lead opens the account again
PASSWORD_RESET_TIMEOUT = 24 * 3600  # a link for a new password, made by the unit lead

LANGUAGE_CODE = "en-gb"
USE_I18N = False
USE_TZ = True
TIME_ZONE = "UTC"

STATIC_URL = "static/"
STATIC_ROOT = Path(env.text("WORKSHEET_STATIC", str(DATA_DIR / "static")))
STATICFILES_DIRS = [BASE_DIR / "static"]
STORAGES = {
    "default": {"BACKEND": "django.core.files.storage.FileSystemStorage"},
    "staticfiles": {"BACKEND": "whitenoise.storage.CompressedManifestStaticFilesStorage"},
}
WHITENOISE_USE_FINDERS = False
WHITENOISE_ALLOW_ALL_ORIGINS = False

SESSION_ENGINE = "worksheet.ward.session_store"
# NIST SP 800-63B-4, AAL2: again after 12-24 h in any case, after an hour at most without use.
SESSION_IDLE_SECONDS = 60 * env.number("WORKSHEET_IDLE_MINUTES", 45, 5, 60)
SESSION_ABSOLUTE_SECONDS = 3600 * env.number("WORKSHEET_SESSION_HOURS", 13, 1, 24)
SESSION_COOKIE_AGE = SESSION_ABSOLUTE_SECONDS
SESSION_COOKIE_NAME = "__Host-worksheet" if HTTPS else "worksheet"
CSRF_COOKIE_NAME = "__Host-csrf" if HTTPS else "csrf"
CSRF_COOKIE_HTTPONLY = True
SESSION_COOKIE_HTTPONLY = True
SESSION_COOKIE_SAMESITE = "Lax"
CSRF_COOKIE_SAMESITE = "Lax"
SESSION_COOKIE_SECURE = CSRF_COOKIE_SECURE = HTTPS
SECURE_SSL_REDIRECT = HTTPS
SECURE_REDIRECT_EXEMPT = [r"^health/$"]  # asked by the service manager on this machine
SECURE_HSTS_SECONDS = 31_536_000 if HTTPS else 0
SECURE_HSTS_INCLUDE_SUBDOMAINS = HTTPS
SECURE_HSTS_PRELOAD = HTTPS
SECURE_REFERRER_POLICY = "same-origin"
X_FRAME_OPTIONS = "DENY"
# One line a record, as JSON; never a value, a name or an address of a patient's page with its query.
LOGGING = {
    "version": 1,
    "disable_existing_loggers": False,
    "formatters": {"json": {"()": "worksheet.ward.logs.JsonLines"}},
    "handlers": {"stderr": {"class": "logging.StreamHandler", "formatter": "json"}},
    "root": {"handlers": ["stderr"], "level": "WARNING"},
    "loggers": {"django": {"handlers": ["stderr"], "level": "WARNING", "propagate": False}},
}

DATA_UPLOAD_MAX_MEMORY_SIZE = 2 * 1024 * 1024  # forms; files have limits of their own
DATA_UPLOAD_MAX_NUMBER_FIELDS = 2000
CSRF_FAILURE_VIEW = "worksheet.review.errors.csrf_failure"
DEFAULT_AUTO_FIELD = "django.db.models.BigAutoField"
