from __future__ import annotations

from django.urls import URLPattern, URLResolver, path

import fleet.converters  # noqa: F401  (the sort of code in the addresses below)
from reliability.life_panels import PANELS
from reliability.views import (
    backtest,
    forecast,
    forecast_kept,
    forecast_replacement,
    life,
    life_left_out,
    life_panels,
    life_print,
    module,
    redesigns,
    today,
)

urlpatterns: list[URLPattern | URLResolver] = [
    path("", today.today, name="today"),
    path("m/<code:tag>", module.module, name="module"),
    path("life/", life.life, name="life"),
    path("forecast/", forecast.forecast, name="forecast"),
    path("forecast/keep/", forecast_kept.keep_forecast, name="keep_forecast"),
    path("forecast/kept/", forecast_kept.kept_forecasts, name="kept_forecasts"),
    path("forecast/kept/<int:pk>/", forecast_kept.kept_forecast, name="kept_forecast"),
    path(
        "forecast/planned-replacement/<code:code>/",
        forecast_replacement.planned_replacement,
        name="planned_replacement",
    ),
    path("forecast/backtest/", backtest.backtest, name="backtest"),
    path("redesigns/", redesigns.redesigns, name="redesigns"),
    path("redesigns/<code:code>/", redesigns.redesign, name="redesign"),
    path("redesigns/<code:code>/money/", redesigns.redesign_money, name="redesign_money"),
    path("redesigns/<code:code>/print/", redesigns.redesign_print, name="redesign_print"),
    path("life/left-out/", life_left_out.life_left_out, name="life_left_out"),
    path("life/print/", life_print.life_print, name="life_print"),
    path("life/groups/", life_panels.life_groups, name="life_groups"),
    *(
        path(f"life/{panel.name}/", life_panels.life_panel, {"name": panel.name}, name=f"life_{panel.key}")
        for panel in PANELS
    ),
]
