"""What a template may hold under the strict content security policy, and in which tone."""

from __future__ import annotations

import re
from collections.abc import Iterator
from pathlib import Path

from tests.layout.findings import Finding, files, line_of, name_of

TEMPLATES = ("templates", "fleet/templates", "reliability/templates")
DRAWINGS = ("fleet", "reliability")
FORBIDDEN_MARKUP = {
    r"<[^>]*\sstyle\s*=": "style= is blocked by the content policy; give it a class in the style sheet",
    r"<[^>]*\son[a-z]+\s*=\s*[\"']": "an inline handler is blocked by the content policy; listen in a script file",
    r"<script(?![^>]*\bsrc\s*=)(?![^>]*application/json)[^>]*>": (
        "an inline script is blocked by the content policy; put it into a file under static/"
    ),
    r"<style\b": "a style element is blocked by the content policy; put the rules into the style sheet",
    r"\bhref\s*=\s*[\"']\s*javascript:": "a javascript: address is blocked by the content policy; use a button",
    r"\bhx-on\b|\bhx-vals\s*=\s*[\"']js:": "htmx may not evaluate code here; listen in a file under static/",
    r"<(?:script|img|iframe|source|video|audio|embed)\b[^>]*\bsrc\s*=\s*[\"'](?:https?:)?//": (
        "an outside address would be contacted; copy the file into static/"
    ),
    r"<link\b[^>]*\bhref\s*=\s*[\"'](?:https?:)?//": (
        "an outside address would be contacted; copy the file into static/"
    ),
}
NOT_TEXT = re.compile(r"<!--.*?-->|\{#.*?#\}|\{%.*?%\}|\{\{.*?\}\}|<[^>]*>", re.DOTALL)


def templates_obey_the_policy(root: Path) -> Iterator[Finding]:
    for path in files(root, "*.html", "*.svg", under=TEMPLATES):
        text = path.read_text(encoding="utf-8")
        for pattern, remedy in FORBIDDEN_MARKUP.items():
            for match in re.finditer(pattern, text, re.IGNORECASE):
                yield Finding(name_of(root, path), line_of(text, match.start()), remedy)


def drawings_obey_the_policy(root: Path) -> Iterator[Finding]:
    """Markup that Python writes (the life lines) stands under the same policy."""
    markup = re.compile(r"<[a-z]+[^<>\n]*\sstyle=[\"'\\]")
    for path in files(root, "*.py", under=DRAWINGS):
        text = path.read_text(encoding="utf-8")
        for match in markup.finditer(text):
            remedy = "style= is blocked by the content policy; give it a class in the style sheet"
            yield Finding(name_of(root, path), line_of(text, match.start()), remedy)


def pages_do_not_shout(root: Path) -> Iterator[Finding]:
    for path in files(root, "*.html", "*.txt", under=TEMPLATES):
        text = path.read_text(encoding="utf-8")
        visible = NOT_TEXT.sub(lambda match: re.sub(r"[^\n]", " ", match.group()), text)
        for match in re.finditer("!", visible):
            remedy = "an exclamation mark; say the state, the value and the remedy in a calm sentence"
            yield Finding(name_of(root, path), line_of(visible, match.start()), remedy)


RULES = [templates_obey_the_policy, drawings_obey_the_policy, pages_do_not_shout]
