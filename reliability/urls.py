from __future__ import annotations

from django.urls import URLPattern, URLResolver, path

import fleet.converters  # noqa: F401  (the sort of code in the addresses below)
from reliability.views import module, today

urlpatterns: list[URLPattern | URLResolver] = [
    path("", today.today, name="today"),
    path("m/<code:tag>", module.module, name="module"),
]
