"""The first person of a new book."""

from __future__ import annotations

import getpass
import json
import os
import sys
from typing import Any

from django.contrib.auth.password_validation import validate_password
from django.core.exceptions import ValidationError
from django.core.management.base import BaseCommand, CommandError, CommandParser

from fleet.actions.base import change
from fleet.history import writing
from fleet.models import Person, Role
from fleet.models.codes import clean_code, validate_code
from fleet.reset_links import reset_path
from fleet.rights import PEOPLE

PASSWORD = "HALFNUT_MANAGER_PASSWORD"
ADDRESS = "http://127.0.0.1:8000"


class Command(BaseCommand):
    help = (
        "Makes the first manager of a book. The password is taken from HALFNUT_MANAGER_PASSWORD or asked for; "
        "without one, a link that works once is printed, by which the manager chooses it."
    )

    def add_arguments(self, parser: CommandParser) -> None:
        parser.add_argument("--code", help="the name to sign in with, like ANNA")
        parser.add_argument("--name", help="the full name")
        parser.add_argument("--another", action="store_true", help="although there is a manager already")
        parser.add_argument("--link", action="store_true", help="ask for no password, print a link")
        parser.add_argument("--address", default=ADDRESS, help="the book's address before the link (%(default)s)")
        parser.add_argument("--json", action="store_true", help="print one JSON document")

    def handle(self, *args: Any, code: str | None, name: str | None, another: bool, **options: Any) -> None:
        chiefs = Person.objects.filter(role__in=[Role.MANAGER, Role.ADMINISTRATOR], is_active=True)
        if chiefs.exists() and not another:
            raise CommandError(
                f"This book has a manager already: {chiefs[0]}. Add --another for one more, "
                "or hand over a new link with reset_link."
            )
        asks = sys.stdin.isatty()
        code = clean_code(code or (input("Code to sign in with, like ANNA: ") if asks else ""))
        name = (name or (input("Full name: ") if asks else "") or code).strip()
        self.look_over(code, name)
        person = Person(code=code, name=name, role=Role.MANAGER, all_sites=True)
        person.set_password(self.password(person, ask=asks and not options["link"]))
        with writing(source="command"), change(by=None, right=PEOPLE, raises_version=False):
            person.save()
        self.say(person, options)

    def look_over(self, code: str, name: str) -> None:
        if not code:
            raise CommandError("The code is missing. Give it with --code, like --code ANNA.")
        try:
            validate_code(code)
        except ValidationError as error:
            raise CommandError(error.messages[0]) from None
        if len(name) > 120:
            raise CommandError(f"The name has {len(name)} characters. Shorten it to 120.")
        if Person.objects.filter(code=code).exists():
            raise CommandError(f"Somebody signs in as {code} already. Choose another code.")

    def password(self, person: Person, *, ask: bool) -> str | None:
        """None where a link has to do."""
        password = os.environ.get(PASSWORD, "")
        if not password and ask:
            password = getpass.getpass("Password (leave empty for a link): ")
            if password and getpass.getpass("Once more: ") != password:
                raise CommandError("The two passwords differ. Nobody was added; start again.")
        if not password:
            return None
        try:
            validate_password(password, person)
        except ValidationError as error:
            raise CommandError(" ".join(error.messages)) from None
        return password

    def say(self, person: Person, options: dict[str, Any]) -> None:
        link = "" if person.has_usable_password() else options["address"].rstrip("/") + reset_path(person)
        if options["json"]:
            self.stdout.write(json.dumps({"person": person.code, "name": person.name, "link": link}))
            return
        self.stdout.write(f"{person} manages this book.")
        if link:
            self.stdout.write(f"To choose a password, once, within three days:\n{link}")
