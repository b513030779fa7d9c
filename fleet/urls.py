from __future__ import annotations

from django.urls import URLPattern, URLResolver, path

from fleet.views import sign_in

urlpatterns: list[URLPattern | URLResolver] = [
    path("sign-in/", sign_in.sign_in, name="sign_in"),
    path("sign-out/", sign_in.sign_out, name="sign_out"),
    path("password/", sign_in.change_password, name="change_password"),
    path("password/<uidb64>/<token>/", sign_in.reset_password, name="reset_password"),
]
