"""People, their role and the sites they see."""

from __future__ import annotations

from typing import Any

from django.contrib.auth.base_user import AbstractBaseUser, BaseUserManager
from django.db import models
from django.utils.crypto import salted_hmac

from fleet.history import kept_history
from fleet.models.codes import Coded, clean_code
from fleet.models.mixins import Versioned


class Role(models.TextChoices):
    ADMINISTRATOR = "administrator"
    MANAGER = "manager"
    PLANNER = "planner"
    CREW = "crew"
    BENCH = "bench"
    CONTACT = "contact"


class PersonQuerySet(models.QuerySet):
    def for_person(self, person: Person) -> PersonQuerySet:
        """The office sees everybody (the page of people is the managers' own); anybody else only themselves."""
        if person.may("correct"):
            return self
        return self.filter(pk=person.pk)


class PersonManager(BaseUserManager.from_queryset(PersonQuerySet)):  # type: ignore[misc]
    def get_by_natural_key(self, code: str) -> Person:
        return self.get(code=clean_code(code))

    def create_user(self, code: str, password: str | None = None, **fields: Any) -> Person:
        person = self.model(code=code, **fields)
        person.set_password(password)
        person.save()
        return person


class Person(Coded, Versioned, AbstractBaseUser):
    """Somebody who signs in; `code` is the name they sign in with."""

    name = models.CharField(max_length=120)
    role = models.CharField(max_length=15, choices=Role.choices)
    all_sites = models.BooleanField(default=False)
    sites = models.ManyToManyField("fleet.Site", blank=True, related_name="people")
    is_active = models.BooleanField("may sign in", default=True)
    sign_in_epoch = models.PositiveIntegerField(default=1, editable=False)
    made_by_demo = models.BooleanField(default=False, editable=False)
    history = kept_history(excluded_fields=["password", "last_login"], m2m_fields=[sites])

    objects = PersonManager()
    USERNAME_FIELD = "code"
    REQUIRED_FIELDS = ["name"]

    def __str__(self) -> str:
        return f"{self.name} ({self.code})"

    def may(self, right: str) -> bool:
        from fleet.rights import may

        return may(self, right)

    def get_full_name(self) -> str:
        return self.name

    def get_session_auth_hash(self) -> str:
        """Raising `sign_in_epoch` signs the person out everywhere."""
        return salted_hmac(
            "fleet.person.session", f"{self.password}:{self.sign_in_epoch}", algorithm="sha256"
        ).hexdigest()

    def get_session_auth_fallback_hash(self) -> list[str]:
        return []
