"""Digests of template sets: the same for the same contents, whatever file they come from."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import fields

from semitau.core.content_digest import content_digest
from semitau.core.templates import Template, TemplateSet


def templates_digest(templates: TemplateSet) -> str:
    """SHA-256 of everything in a template set that a fit sees, data apart."""
    parts = {field.name: getattr(templates, field.name) for field in fields(templates)}
    for apart in ("data", "provenance"):
        del parts[apart]
    parts["templates"] = {key: _contents(template) for key, template in sorted(templates.templates.items())}
    return content_digest(parts)


def _contents(template: Template) -> dict[str, object]:
    found = {field.name: getattr(template, field.name) for field in fields(template)}
    return {name: dict(sorted(part.items())) if isinstance(part, Mapping) else part for name, part in found.items()}
