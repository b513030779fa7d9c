from __future__ import annotations

from django.urls import URLPattern, URLResolver, path

import fleet.converters  # noqa: F401  (the sort of code in the addresses below)
from reliability.views import forecast, life, module, redesigns, today

urlpatterns: list[URLPattern | URLResolver] = [
    path("", today.today, name="today"),
    path("m/<code:tag>", module.module, name="module"),
    path("life/", life.life, name="life"),
    path("forecast/", forecast.forecast, name="forecast"),
    path("redesigns/", redesigns.redesigns, name="redesigns"),
    path("redesigns/<code:code>/", redesigns.redesign, name="redesign"),
    path("life/left-out/", life.life_left_out, name="life_left_out"),
]
