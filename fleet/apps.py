from django.apps import AppConfig


class FleetConfig(AppConfig):
    name = "fleet"
    verbose_name = "Records"

    def ready(self) -> None:
        from fleet import checks, history  # noqa: F401  (both register themselves)
