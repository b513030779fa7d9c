from django.apps import AppConfig


class FleetConfig(AppConfig):
    name = "fleet"
    verbose_name = "Records"

    def ready(self) -> None:
        from fleet.forms.plain_words import speak_plainly

        speak_plainly()
        from fleet import checks, history  # noqa: F401  (both register themselves)
