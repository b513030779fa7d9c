"""In, out, and passwords. People have no mail address here: links to choose a password are handed over."""

from __future__ import annotations

from axes.utils import reset as unlock
from django.contrib import messages
from django.contrib.auth import login, logout, update_session_auth_hash
from django.http import HttpRequest, HttpResponse, QueryDict
from django.shortcuts import redirect, render, resolve_url
from django.utils.http import url_has_allowed_host_and_scheme
from django.views.decorators.cache import never_cache
from django.views.decorators.debug import sensitive_post_parameters
from django.views.decorators.http import require_POST

from fleet.carried import opened
from fleet.forms.sign_in import ChangePasswordForm, NewPasswordForm, SignInForm
from fleet.history import writing
from fleet.reset_links import person_of_link
from fleet.rights import PUBLIC, SEE, needs
from fleet.views.errors import send_again


@needs(PUBLIC)
@never_cache
@sensitive_post_parameters("password")
def sign_in(request: HttpRequest) -> HttpResponse:
    onward, kept = way_on(request), request.POST.get("carried", "")
    form = SignInForm(request, data=posted(request))
    if not request.user.is_authenticated:
        if request.method != "POST" or not form.is_valid():
            context = {"form": form, "next": onward, "carried": kept}
            return render(request, "sign_in/sign_in.html", context, status=422 if form.is_bound else 200)
        login(request, form.get_user())
    entry = opened(kept)
    return send_again(request, entry) if entry else redirect(onward)


def posted(request: HttpRequest) -> QueryDict | None:
    return request.POST if request.method == "POST" else None


def way_on(request: HttpRequest) -> str:
    """Where the person wanted to go, if it lies within the book."""
    wanted = request.POST.get("next") or request.GET.get("next") or ""
    safe = url_has_allowed_host_and_scheme(wanted, {request.get_host()}, require_https=request.is_secure())
    return wanted if safe and "\x00" not in wanted else resolve_url("/")


@needs(PUBLIC)
@require_POST
def sign_out(request: HttpRequest) -> HttpResponse:
    logout(request)
    messages.info(request, "You are signed out on this device.")
    answer = redirect("sign_in")
    answer["Clear-Site-Data"] = '"cache"'  # “Back” on a shared tablet shows no page of whoever had it before
    return answer


@needs(PUBLIC)
@never_cache
@sensitive_post_parameters("new_password1", "new_password2")
def reset_password(request: HttpRequest, uidb64: str, token: str) -> HttpResponse:
    person = person_of_link(uidb64, token)
    if person is None:
        return render(request, "sign_in/link_over.html", status=404)
    form = NewPasswordForm(person, data=posted(request))
    if request.method == "POST" and form.is_valid():
        with writing(person=person, reason="new password by a link"):
            form.save()
        unlock(username=person.code)
        messages.success(request, "Your new password holds from now on. Sign in with it.")
        return redirect("sign_in")
    return render(
        request, "sign_in/new_password.html", {"form": form, "person": person}, status=422 if form.is_bound else 200
    )


@needs(SEE)
@never_cache
@sensitive_post_parameters()
def change_password(request: HttpRequest) -> HttpResponse:
    """Other devices of the person are signed out by it."""
    form = ChangePasswordForm(request.user, data=posted(request))
    if request.method == "POST" and form.is_valid():
        with writing(reason="new password"):
            form.save()
        update_session_auth_hash(request, request.user)
        messages.success(request, "Your new password holds from now on. Your other devices are signed out.")
        return redirect("change_password")
    return render(request, "sign_in/change_password.html", {"form": form}, status=422 if form.is_bound else 200)
