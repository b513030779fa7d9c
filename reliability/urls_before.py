"""Addresses that must be looked at before those of the records: pages of stores that hold estimates."""

from __future__ import annotations

from django.urls import URLPattern, URLResolver, path

from reliability.views import order_list

urlpatterns: list[URLPattern | URLResolver] = [
    path("stores/order/", order_list.order_list, name="order_list"),
]
