"""A law to start from."""

from __future__ import annotations

from hybgen.emit.source import templates_folder
from hybgen.law import read


def starter(name: str, shape: str) -> str:
    """The text of a law of a shape. Raises LawError if the name can't name a law."""
    template = (templates_folder() / "new" / f"{shape.replace('-', '_')}.yaml.jinja").read_text(encoding="utf-8")
    text = template.replace("{{ name }}", name)
    read(text.encode(), f"{name}.yaml")
    return text
