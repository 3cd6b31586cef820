"""The pages that people read, taken apart: fenced blocks, commands, links, paths."""

from __future__ import annotations

import re
import shlex
from dataclasses import dataclass
from pathlib import Path

ROOT = Path(__file__).resolve().parents[2]
PAGES = ("README.md", "DEVELOPERS.md", "CHANGELOG.md")
PACKAGES = ("assumptions", "portfolios", "projection", "reports")

_FENCED = re.compile(r"(?:<!-- (?P<mark>[a-z ]+) -->\n)?```(?P<language>[a-z]*)\n(?P<content>.*?)^```$", re.M | re.S)
_BETWEEN_COMMANDS = {"&&", "||", ";", "{", "}"}


@dataclass(frozen=True)
class Block:
    """A fenced block: its language, its content, and the comment on the line before it."""

    language: str
    content: str
    mark: str


def text(page: str) -> str:
    """Return a page."""
    return (ROOT / page).read_text(encoding="utf-8")


def blocks(page: str) -> list[Block]:
    """Return the fenced blocks of a page."""
    return [Block(found["language"], found["content"], found["mark"] or "") for found in _FENCED.finditer(text(page))]


def block(page: str, mark: str) -> Block:
    """Return the block with this comment before it."""
    (found,) = [one for one in blocks(page) if one.mark == mark]
    return found


def prose(page: str) -> str:
    """Return a page without its fenced blocks."""
    return _FENCED.sub("", text(page))


def commands(page: str) -> list[list[str]]:
    """Return the words of every call of ``duecourse`` in the shell blocks of a page."""
    calls: list[list[str]] = []
    for one in blocks(page):
        if one.language == "sh":
            calls += _calls(shlex.split(one.content.replace("\n", " ; "), comments=True))
    return [call[1:] for call in calls if call and Path(call[0]).name == "duecourse"]


def _calls(words: list[str]) -> list[list[str]]:
    calls: list[list[str]] = [[]]
    for word in words:
        if word in _BETWEEN_COMMANDS:
            calls.append([])
        else:
            # A separator may stand right behind the last word.
            calls[-1].append(word.rstrip(";"))
            if word.endswith(";"):
                calls.append([])
    return calls


def inline_code(page: str) -> list[str]:
    """Return what stands between single backticks, on one line."""
    return [" ".join(code.split()) for code in re.findall(r"`([^`]+)`", prose(page))]


def links(page: str) -> list[str]:
    """Return the targets of all links."""
    return re.findall(r"\]\(([^)\s]+)\)", prose(page))


def anchors(page: str) -> set[str]:
    """Return the anchors of a page's headings, as code hosts make them."""
    headings = re.findall(r"^#+ (.+)$", prose(page), re.M)
    return {re.sub(r"[^\w\- ]", "", heading.lower()).replace(" ", "-") for heading in headings}


def table_after(page: str, heading: str) -> list[list[str]]:
    """Return the rows, without the head, of the first table whose head starts with a cell."""
    lines = text(page).splitlines()
    start = next(place for place, line in enumerate(lines) if line.startswith(f"| {heading} |"))
    rows = []
    for line in lines[start + 2 :]:
        if not line.startswith("|"):
            break
        rows.append([cell.strip() for cell in line.strip("|").split("|")])
    return rows
