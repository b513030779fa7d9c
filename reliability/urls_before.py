"""Addresses that must be looked at before those of the records: pages of stores and bench that hold estimates."""

from __future__ import annotations

from django.urls import URLPattern, URLResolver, path

from reliability.views import bench_backlog, order_list

urlpatterns: list[URLPattern | URLResolver] = [
    path("stores/order/", order_list.order_list, name="order_list"),
    path("bench/backlog/", bench_backlog.bench_backlog, name="bench_backlog"),
]
