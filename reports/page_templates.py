"""The templates of the web pages, and the filters that they use."""

from __future__ import annotations

from functools import cache
from pathlib import Path
from typing import Any

import jinja2

from .figures import amount, count, counted, seconds, shown, size, words


@cache
def template(name: str) -> jinja2.Template:
    """Return a page's template, compiled when it is first asked for. Every text put in is escaped."""
    environment = jinja2.Environment(
        loader=jinja2.FileSystemLoader(Path(__file__).with_name("templates")),
        autoescape=True,
        trim_blocks=True,
        lstrip_blocks=True,
        undefined=jinja2.StrictUndefined,
    )
    filters: dict[str, Any] = {
        "amount": amount,
        "count": count,
        "counted": counted,
        "seconds": seconds,
        "shown": shown,
        "size": size,
        "words": words,
    }
    environment.filters.update(filters)
    return environment.get_template(name)
