"""The site map. Every view names its right; the middleware refuses those that do not."""

from django.urls import include, path

urlpatterns = [
    path("", include("reliability.urls_before")),
    path("", include("fleet.urls")),
    path("", include("reliability.urls")),
]
