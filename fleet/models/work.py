"""Work in the background: progress, cancel, heartbeat, result; and the files it reads and makes."""

from __future__ import annotations

import uuid
from typing import TYPE_CHECKING

from django.conf import settings
from django.db import models

if TYPE_CHECKING:
    from fleet.models.person import Person


def sees_all_work(person: Person) -> bool:
    return person.all_sites and person.may("people")


class WorkState(models.TextChoices):
    WAITING = "waiting"
    RUNNING = "running"
    DONE = "done"
    FAILED = "failed"
    CANCELLED = "cancelled"


class WorkQuerySet(models.QuerySet):
    def for_person(self, person: Person) -> WorkQuerySet:
        """Managers who see all sites see all work, others their own: a result holds what its person sees."""
        return self if sees_all_work(person) else self.filter(person=person)


class Work(models.Model):
    """One piece of background work; every write of a worker is fenced by `attempt`."""

    id = models.UUIDField(primary_key=True, default=uuid.uuid4, editable=False)
    kind = models.CharField(max_length=40)
    title = models.CharField(max_length=200, default="")
    arguments = models.JSONField(default=dict)
    person = models.ForeignKey(settings.AUTH_USER_MODEL, on_delete=models.PROTECT, null=True, related_name="+")
    state = models.CharField(max_length=9, choices=WorkState.choices, default=WorkState.WAITING)
    attempt = models.PositiveIntegerField(default=0)
    task_id = models.CharField(max_length=64, default="", blank=True)
    done = models.BigIntegerField(default=0)
    total = models.BigIntegerField(default=0)
    message = models.CharField(max_length=300, default="", blank=True)
    result = models.JSONField(default=dict)
    cancel_asked = models.BooleanField(default=False)
    made_at = models.DateTimeField(auto_now_add=True)
    started_at = models.DateTimeField(null=True)
    heartbeat_at = models.DateTimeField(null=True)
    finished_at = models.DateTimeField(null=True)

    objects = WorkQuerySet.as_manager()

    class Meta:
        ordering = ["-made_at"]
        indexes = [models.Index(fields=["state", "heartbeat_at"])]

    def __str__(self) -> str:
        return self.title or self.kind

    @property
    def ended(self) -> bool:
        return self.state in {WorkState.DONE, WorkState.FAILED, WorkState.CANCELLED}


class KeptFileQuerySet(models.QuerySet):
    def for_person(self, person: Person) -> KeptFileQuerySet:
        return self if sees_all_work(person) else self.filter(work__person=person)


class KeptFile(models.Model):
    """A file in the database, so that any worker on any machine reads what any web process took in."""

    id = models.UUIDField(primary_key=True, default=uuid.uuid4, editable=False)
    work = models.ForeignKey(Work, on_delete=models.CASCADE, null=True, related_name="files")
    role = models.CharField(max_length=10, default="input", choices=[("input", "input"), ("result", "result")])
    name = models.CharField(max_length=200)
    content_type = models.CharField(max_length=100, default="application/octet-stream")
    content = models.BinaryField()
    made_at = models.DateTimeField(auto_now_add=True)

    objects = KeptFileQuerySet.as_manager()

    def __str__(self) -> str:
        return self.name
