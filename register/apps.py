from django.apps import AppConfig
from django.db.models.signals import post_migrate


class RegisterConfig(AppConfig):
    name = "register"
    verbose_name = "Register"

    def ready(self) -> None:
        from register import checks, entering, guards  # noqa: F401 - checks register themselves

        entering.watch()
        post_migrate.connect(guards.install_after_migrate, dispatch_uid="register.guards")
