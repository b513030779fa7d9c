"""Addresses that must be looked at before those of the records: pages of stores and bench that hold estimates."""

from __future__ import annotations

from django.urls import URLPattern, URLResolver, path

import fleet.converters  # noqa: F401  (the sort of code in the addresses below)
from reliability.views import bench_backlog, cover, order_list, places

urlpatterns: list[URLPattern | URLResolver] = [
    path("stores/", cover.stores, name="stores"),
    path("stores/<code:code>/lasts/", cover.store_cover, name="store_cover"),
    path("stores/order/", order_list.order_list, name="order_list"),
    path("stores/places/", places.places, name="places"),
    path("bench/backlog/", bench_backlog.bench_backlog, name="bench_backlog"),
]
