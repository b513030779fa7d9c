from django.apps import AppConfig


class ReliabilityConfig(AppConfig):
    name = "reliability"
    verbose_name = "What the records mean"
