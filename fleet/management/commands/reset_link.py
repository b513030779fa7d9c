"""A link by which somebody chooses a password."""

from __future__ import annotations

import json
from typing import Any

from django.core.management.base import BaseCommand, CommandError, CommandParser

from fleet.management.commands.first_manager import ADDRESS
from fleet.models import Person
from fleet.models.codes import clean_code
from fleet.reset_links import reset_path


class Command(BaseCommand):
    help = (
        "Prints a link by which PERSON chooses a new password. It works once, for three days; hand it over in private."
    )

    def add_arguments(self, parser: CommandParser) -> None:
        parser.add_argument("person", metavar="PERSON", help="the code they sign in with")
        parser.add_argument("--address", default=ADDRESS, help="the book's address before the link (%(default)s)")
        parser.add_argument("--json", action="store_true", help="print one JSON document")

    def handle(self, *args: Any, person: str, address: str, **options: Any) -> None:
        found = Person.objects.filter(code=clean_code(person)).first()
        if found is None:
            raise CommandError(f"Nobody signs in as {person}. Look the code up under People.")
        if not found.is_active:
            raise CommandError(f"{found} may not sign in. A manager allows it again under People.")
        link = address.rstrip("/") + reset_path(found)
        self.stdout.write(json.dumps({"person": found.code, "link": link}) if options["json"] else link)
