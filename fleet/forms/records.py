"""Files in, and what to take out."""

from __future__ import annotations

import io
import zipfile
from typing import Any

from django import forms
from django.conf import settings

from fleet.models import Site
from fleet.work import GivenFile

SEVERAL = (".csv",)
ALONE = (".zip", ".xlsx")
MORE_THAN_ONE = "A .zip or .xlsx comes alone. Choose one of them, or several .csv files."


class ManyFilesInput(forms.ClearableFileInput):
    allow_multiple_selected = True


class ManyFilesField(forms.FileField):
    """One or several files; the cleaned value is a list."""

    widget = ManyFilesInput

    def clean(self, data: Any, initial: Any = None) -> list[Any]:
        given = data if isinstance(data, list | tuple) else [data]
        return [super(ManyFilesField, self).clean(each, initial) for each in given or [None]]


class ImportForm(forms.Form):
    records = ManyFilesField(
        label="Records files",
        help_text="One .xlsx workbook with a sheet a file, one .zip of .csv files, or the .csv files themselves.",
        error_messages={"required": "No file was chosen. Choose one.", "empty": "The file is empty. Choose another."},
    )
    update = forms.BooleanField(
        required=False,
        label="Update",
        help_text="Overwrite records of the book that the files say differently. Otherwise these are reported.",
    )

    def clean_records(self) -> GivenFile:
        """As one file that the background reads: several .csv are packed together."""
        files = self.cleaned_data["records"]
        if sum(file.size for file in files) > settings.IMPORT_MAX_BYTES:
            most = settings.IMPORT_MAX_BYTES // 1024**2
            raise forms.ValidationError(f"The files are larger than {most} MB. Pack them as .zip, or split them.")
        for file in files:
            if not file.name.lower().endswith(SEVERAL + ALONE):
                raise forms.ValidationError(f"{file.name[:80]} is no records file. Choose .xlsx, .zip or .csv files.")
        if len(files) == 1:
            return GivenFile(files[0].name, files[0].read(), files[0].content_type or "application/octet-stream")
        if any(not file.name.lower().endswith(SEVERAL) for file in files):
            raise forms.ValidationError(MORE_THAN_ONE)
        return packed(files)


def packed(files: list[Any]) -> GivenFile:
    content = io.BytesIO()
    with zipfile.ZipFile(content, "w", zipfile.ZIP_DEFLATED) as archive:
        for file in files:
            archive.writestr(file.name.replace("/", "-"), file.read())
    first, rest = files[0].name, len(files) - 1
    return GivenFile(f"{first} and {rest} more.zip", content.getvalue(), "application/zip")


class ExportForm(forms.Form):
    form = forms.ChoiceField(
        label="As",
        choices=[("zip", "a ZIP of CSV files"), ("xlsx", "one workbook (.xlsx)")],
        initial="zip",
        error_messages={"invalid_choice": "Choose ZIP or workbook."},
    )
    site = forms.ChoiceField(label="From", required=False)

    def __init__(self, *args: Any, sites: Any, all_sites: bool, **kwargs: Any) -> None:
        super().__init__(*args, **kwargs)
        every = "all sites" if all_sites else "all sites you see"
        rows: list[Site] = list(sites)
        choices = [("", every), *((site.code, f"{site.code} {site.name}".strip()) for site in rows)]
        self.fields["site"].choices = choices  # type: ignore[attr-defined]
        self.fields["site"].error_messages["invalid_choice"] = "No site of yours has this code. Choose one of the list."
